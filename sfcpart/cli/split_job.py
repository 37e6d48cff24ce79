"""The work behind `sfcpart split`, stage by stage, and what it tells at the end."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from sfcpart.cli.console import Stages, note, print_json, print_written
from sfcpart.cli.figures import print_assessment, print_verdict
from sfcpart.cli.ranks import read_held
from sfcpart.cli.start import read_start
from sfcpart.cli.wishes import load_wish, shape_wish
from sfcpart.launcher import launched
from sfcpart.report.numbers import counted
from sfcpart.report.verdict import judge

if TYPE_CHECKING:
    from sfcpart.measure.assessment import Assessment
    from sfcpart.measure.step_model import StepModel
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition
    from sfcpart.slices.mesh_slice import MeshSlice

__all__ = ["SplitJob"]


class SplitJob:
    """One run: read, split, measure, write."""

    mesh: Mesh | MeshSlice
    partition: Partition
    start: Partition | None = None
    assessment: Assessment

    def __init__(self, options: dict[str, Any], *, step_model: StepModel, quiet: bool) -> None:
        self.options = options
        self.step_model = step_model
        self.formats = options.pop("formats") or ("vtkhdf",)
        self.source = options.pop("mesh")
        self.doing = Stages(quiet=quiet, methods=[options["method"]])

    def run(self) -> None:
        """Do the work; an output folder that cannot be used is refused before it."""
        given = self.options
        if launched():
            self._note_limits()
        if given["output"] is not None:
            from sfcpart.files.parts.folder import check_output_folder

            check_output_folder(given["output"], overwrite=given["overwrite"])
        with self.doing(f"reading {self.source}"):
            self.mesh = read_held(self.source, merge_points=given["merge_points"])
        if given["start"] is not None:
            with self.doing(f"reading the parts of {given['start']}"):
                self.start = read_start(self.mesh, given["start"])
            given["n_parts"] = given["n_parts"] or self.start.n_parts
        load = load_wish(given)
        with self.doing(f"splitting {self.mesh.n_cells:,} cells"):
            self._split(load)
        with self.doing(f"measuring {self.partition.n_parts:,} parts"):
            self._measure(load)
        if given["output"] is not None:
            with self.doing(f"writing {given['output']}"):
                self._write()

    def _note_limits(self) -> None:
        """Say what rank 0 will do alone."""
        from sfcpart.methods.on_one_rank import splits_by_slices
        from sfcpart.methods.registry import METHODS

        given = self.options
        if not splits_by_slices(METHODS[given["method"]], given["cuts"]):
            what = given["method"] if given["cuts"] == "balanced" else "--cuts least"
            note(f"{what} runs on rank 0, which must hold the cells and their graph")
        whole = [name for name in ("picture", "report") if given[name]]
        whole += ["format same"] if "same" in self.formats else []
        if whole:
            names = ", ".join(f"--{name}" for name in whole)
            note(f"{names}: made by rank 0, which gathers what it needs of the whole mesh")

    def _split(self, load: dict[str, Any]) -> None:
        """Split with the weights, speeds and limits of `load`."""
        from sfcpart import api

        given = self.options
        if self.start is None:
            self.partition = api.split(
                self.mesh, given["n_parts"], method=given["method"], **shape_wish(given), **load
            )
            return
        wish = {k: v for k, v in shape_wish(given).items() if k not in ("cuts", "seed")}
        self.partition = api.smooth(self.mesh, self.start, given["n_parts"], **wish, **load)

    def _measure(self, load: dict[str, Any]) -> None:
        """Measure with the same."""
        from sfcpart import api

        self.assessment = api.assess(self.mesh, self.partition, step_model=self.step_model, **load)

    def _write(self) -> None:
        """Write the folder."""
        from sfcpart import api

        given = self.options
        api.write_split(
            given["output"],
            self.mesh,
            self.partition,
            assessment=self.assessment,
            formats=self.formats,
            layers=given["layers"],
            across=given["across"],
            overwrite=given["overwrite"],
            picture=given["picture"],
            report=given["report"],
            source=self.source,
            options=self._told_options(),
        )

    def _told_options(self) -> dict[str, Any]:
        """Return the options as they go into the summary."""
        left_out = ("output", "overwrite", "picture", "report")
        told = {k: v for k, v in self.options.items() if k not in left_out and v not in (None, ())}
        return told | {"formats": list(self.formats)}

    def report(self, *, as_json: bool, quiet: bool) -> None:
        """Print the result: JSON, or a line, figures and where they are."""
        output = self.options["output"]
        if as_json:
            about = {"mesh": self.source, "output": output, "options": self._told_options()}
            print_json({**about, **self.assessment.to_json_dict()})
            return
        if quiet:
            return
        n_cells, n_parts = self.mesh.n_cells, self.partition.n_parts
        print(
            f"{self.source}: {counted(n_cells, 'cell')} into {counted(n_parts, 'part')} by "
            f"{self.options['method']}"
        )
        print_verdict(judge(self.assessment))
        print_assessment(self.assessment)
        if output is not None:
            print_written(output, self._files())

    def _files(self) -> list[str]:
        """Return the names of what was written, the list for overwriting left out."""
        from pathlib import Path

        folder = Path(self.options["output"])
        names = sorted(entry.name for entry in folder.iterdir() if entry.name[0] != ".")
        pieces = [name for name in names if name.endswith(".vtu") and name != "parts.vtu"]
        shown = [name for name in names if name not in pieces]
        return shown + ([f"{len(pieces)} pieces .vtu"] if pieces else [])
