"""What goes into the folder beside the parts."""

from __future__ import annotations

import json

import numpy as np
import pytest

import sfcpart
from sfcpart.deliver import file_digest
from sfcpart.errors import InputError
from sfcpart.mesh.shapes import lattice

MESH = lattice((4, 3)).to_mesh()
PARTS = sfcpart.split(MESH, 3)


@pytest.mark.parametrize(
    ("given", "title"),
    [({}, ""), ({"source": "a.txt"}, "a.txt"), ({"source": "a.txt", "title": "Pier"}, "Pier")],
)
def test_the_title_is_what_was_asked_or_the_name_of_the_input(tmp_path, monkeypatch, given, title):
    seen = []
    monkeypatch.chdir(tmp_path)
    (tmp_path / "a.txt").write_text("mesh")
    monkeypatch.setattr(
        "sfcpart.report.picture.draw_split", lambda *_, title, **__: seen.append(title)
    )
    sfcpart.write_split("parts", MESH, PARTS, picture=True, **given)
    assert seen == [title]


def test_the_summary_names_the_input_and_the_options(tmp_path):
    source = tmp_path / "a.txt"
    source.write_bytes(b"mesh" * 3_000_000)  # more than one block
    folder = sfcpart.write_split(
        tmp_path / "parts", MESH, PARTS, source=source, options={"n_parts": 3}
    )
    told = json.loads((folder / "summary.json").read_text())
    assert told["input"]["digest"] == file_digest(source)
    assert (told["input"]["n_cells"], told["input"]["dim"]) == (12, 2)
    assert told["options"] == {"n_parts": 3}
    assert told["sfcpart"] == sfcpart.__version__
    assert np.load(folder / "cell_part.npy").tolist() == PARTS.cell_part.tolist()


def test_digests_are_those_of_sha256(tmp_path):
    (tmp_path / "a").write_bytes(b"abc")  # FIPS 180-2, appendix B.1
    assert file_digest(tmp_path / "a") == (
        "sha256:ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad"
    )


@pytest.mark.parametrize(
    ("formats", "words"), [(("vtp",), "'vtp'"), ((), "none"), (("same",), "source")]
)
def test_formats_that_cannot_be_are_refused(tmp_path, formats, words):
    with pytest.raises(InputError, match=words):
        sfcpart.write_split(tmp_path / "parts", MESH, PARTS, formats=formats)
    assert not (tmp_path / "parts").exists()
