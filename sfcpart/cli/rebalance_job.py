"""The work behind `sfcpart rebalance`, stage by stage, and what it tells at the end."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

from sfcpart.cli.console import Stages, print_json, print_pairs, print_written
from sfcpart.cli.figures import print_verdict
from sfcpart.cli.inputs import partition_from_place, read_mesh, read_numbers
from sfcpart.cli.wishes import load_wish, shape_wish
from sfcpart.report.numbers import amount, counted, number, percent, seconds
from sfcpart.report.verdict import judge_rebalance

if TYPE_CHECKING:
    from sfcpart.dtypes import Array
    from sfcpart.measure.step_model import StepModel
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition
    from sfcpart.resplit.result import Rebalance

__all__ = ["RebalanceJob"]


class RebalanceJob:
    """One run: read, split again, write."""

    mesh: Mesh
    result: Rebalance

    def __init__(self, options: dict[str, Any], *, step_model: StepModel, quiet: bool) -> None:
        self.options = options
        self.step_model = step_model
        self.formats = options.pop("formats") or ("vtkhdf",)
        self.source = options.pop("mesh")
        graph_method = "smoothed" if options["way"] in ("auto", "smooth") else options["method"]
        self.doing = Stages(quiet=quiet, methods=["hilbert", graph_method])

    def run(self) -> None:
        """Do the work; an output folder that cannot be used is refused before it."""
        given = self.options
        if given["output"] is not None:
            from sfcpart.files.parts.folder import check_output_folder

            check_output_folder(given["output"], overwrite=given["overwrite"])
        with self.doing(f"reading {self.source}"):
            self.mesh = read_mesh(self.source, merge_points=given["merge_points"])
            old, origin = self._old()
        if given["n_parts"] is None:
            given["n_parts"] = old.n_parts
        with self.doing(f"splitting {self.mesh.n_cells:,} cells again"):
            self._split(old, origin)
        if given["output"] is not None:
            with self.doing(f"writing {given['output']}"):
                self._write()

    def _old(self) -> tuple[Partition, dict[str, Any]]:
        """Return the old partition and what tells where cells come from."""
        given = self.options
        old_mesh = read_mesh(given["old_mesh"]) if given["old_mesh"] else None
        carried = given["parent"] or given["merged_into"]
        if old_mesh is not None:
            old = partition_from_place(old_mesh.cell_fields, given["old"], old_mesh.n_cells)
        elif carried:
            old = partition_from_place({}, given["old"], None)
        else:
            old = partition_from_place(self.mesh.cell_fields, given["old"], self.mesh.n_cells)
        merged = given["merged_into"]
        origin = {
            "parent": self._parent(),
            "merged_into": None if merged is None else read_numbers(merged, old.n_cells),
            "old_mesh": old_mesh,
        }
        return old, origin

    def _parent(self) -> Array | str | None:
        """Return the parent of each cell: a field by name, or the numbers of a file."""
        parent: str | None = self.options["parent"]
        if parent is None or parent in self.mesh.cell_fields or not Path(parent).exists():
            return parent
        return read_numbers(parent, self.mesh.n_cells)

    def _split(self, old: Partition, origin: dict[str, Any]) -> None:
        """Split again with the weights, speeds and limits that were given."""
        from sfcpart.api.rebalance import rebalance

        given = self.options
        same = ("n_parts", "way", "method", "keep", "steps", "cell_bytes")
        self.result = rebalance(
            self.mesh,
            old,
            step_model=self.step_model,
            **{name: given[name] for name in same},
            **origin,
            **shape_wish(given),
            **load_wish(given),
        )

    def _write(self) -> None:
        """Write the folder."""
        from sfcpart.api.rebalance import write_rebalance

        given = self.options
        same = ("layers", "across", "overwrite", "picture", "report")
        write_rebalance(
            given["output"],
            self.mesh,
            self.result,
            formats=self.formats,
            source=self.source,
            options=self._told_options(),
            **{name: given[name] for name in same},
        )

    def _told_options(self) -> dict[str, Any]:
        """Return the options as they go into the summary."""
        left_out = ("output", "overwrite", "picture", "report")
        told = {k: v for k, v in self.options.items() if k not in left_out and v not in (None, ())}
        return told | {"formats": list(self.formats)}

    def report(self, *, as_json: bool, quiet: bool) -> None:
        """Print the result: JSON, or the verdict, figures and where they are."""
        output, result = self.options["output"], self.result
        if as_json:
            about = {"mesh": self.source, "output": output, "options": self._told_options()}
            print_json({**about, **result.to_json_dict()})
            return
        if quiet:
            return
        print(
            f"{self.source}: {counted(self.mesh.n_cells, 'cell')} into "
            f"{counted(result.partition.n_parts, 'part')} again by {result.way}"
        )
        print_verdict(judge_rebalance(result))
        print_pairs(_figures(result))
        if output is not None:
            names = sorted(entry.name for entry in Path(output).iterdir() if entry.name[0] != ".")
            print_written(output, names)


def _figures(result: Rebalance) -> list[tuple[str, str]]:
    """Return names and texts of the figures."""
    moved, verdict = result.migration, result.verdict
    after = result.after.total
    before = result.after.total if result.before is None else result.before.total
    least = "nothing has to move"
    if moved.times_least is not None:
        least = f"{number(moved.times_least)} times the least possible"
    sent, received = moved.sent_cells.max(initial=0), moved.received_cells.max(initial=0)
    rows = [
        ("step", f"{_change(result, verdict.step_before, verdict.step_after, seconds)} (model)"),
        ("imbalance", _change(result, before["imbalance"], after["imbalance"], percent)),
    ]
    if after["cut_faces"] is not None:
        rows.append(("cut faces", _change(result, before["cut_faces"], after["cut_faces"], number)))
    rows += [
        (
            "moves",
            f"{counted(moved.moved_cells, 'cell')} ({percent(moved.moved_share)} of the work), "
            f"{amount(moved.moved_bytes)}; {least}",
        ),
        (
            "busiest",
            f"part {moved.busiest_part}; at most {number(int(sent))} cells sent and "
            f"{number(int(received))} received by one part",
        ),
        (
            "cost",
            f"{seconds(verdict.split_seconds)} splitting (measured), "
            f"{seconds(verdict.move_seconds)} moving (model, network {moved.network.name})",
        ),
    ]
    if len(result.trials) > 1:
        tried = [
            f"{trial.name} {seconds(trial.run_seconds)}"
            if not trial.failure
            else f"{trial.name} refused ({trial.failure})"
            for trial in result.trials
        ]
        text = f"{'; '.join(tried)} for {counted(verdict.steps, 'step')} and moving"
        rows.append(("tried", text))
    return rows


def _change(result: Rebalance, before: Any, after: Any, spell: Any) -> str:
    """Write a figure before and after."""
    if result.before is None:
        return str(spell(after))
    return f"{spell(before)} before, {spell(after)} after"
