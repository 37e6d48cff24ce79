"""A script that ranks run: the command line, several times over; tells the exit codes."""

import os
import sys
from pathlib import Path

from sfcpart.cli.run import run


def main(folder: Path, out: Path) -> None:
    """Run every command in `out` on the meshes of `folder`."""
    channel, refined, shell = (
        f"{folder}/channel.vtkhdf",
        f"{folder}/refined.h5",
        f"{folder}/shell.vtk",
    )
    splits = [
        [channel, "--levels", "2x3", "--format", "vtkhdf", "--format", "vtu"],
        [channel, "--parts", "9", "--weight", "cell=1,face=1", "--across", "points"],
        [refined, "--parts", "3", "--limit", "1:5000", "--picture"],
        [shell, "--parts", "4", "--method", "coordinate", "--layers", "2"],
        ["1/parts.vtkhdf", "--parts", "5", "--format", "same"],
    ]
    others = [
        ["assess", channel, "0", "--csv", "by_folder.csv", "--json"],
        ["assess", "1/parts.vtkhdf", "--field", "part", "--csv", "by_field.csv"],
        ["assess", channel, "1/cell_part.npy", "--csv", "by_file.csv", "-q"],
        ["split", f"{folder}/none.vtkhdf", "-n", "2"],
        ["split", shell, "-n", "1000000"],
        ["split", channel, "--colour"],
        ["assess", channel, "--field", "colour"],
        ["replay", "none.h5", "-n", "2"],
        ["inspect", channel],
    ]
    os.chdir(out)
    codes = [run(["split", *words, "-o", str(k), "-q"]) for k, words in enumerate(splits)]
    codes += [run(words) for words in others]
    sys.stdout.write(f"exit codes {codes}\n")


if __name__ == "__main__":
    main(Path(sys.argv[1]), Path(sys.argv[2]))
