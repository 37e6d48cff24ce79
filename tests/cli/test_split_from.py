"""`sfcpart split --from`: a partition that is there is improved."""

from __future__ import annotations

import json

import numpy as np


def test_a_start_from_a_file_a_folder_or_a_field_is_improved(sfcpart):
    sfcpart("split meshes/channel_mixed.vtu -n 6 -o parts -q")
    before = json.loads(sfcpart("assess meshes/channel_mixed.vtu parts --json").out)
    for place in ("parts", "parts/cell_part.npy"):
        code, out, err = sfcpart(f"split meshes/channel_mixed.vtu --from {place} --json")
        after = json.loads(out)
        assert (code, err) == (0, "")
        assert after["total"]["n_parts"] == 6
        assert after["total"]["cut_faces"] < before["total"]["cut_faces"]
        assert after["total"]["imbalance"] <= 0.03 + 1e-9
    first = sfcpart("split meshes/turbine.vtu --from body").out.splitlines()[0]
    assert first.endswith("into 2 parts by smoothed")


def test_a_start_may_leave_parts_empty_that_are_then_filled(sfcpart):
    np.savetxt("start.csv", np.zeros(2784, int), fmt="%d", header="part", comments="")
    out = sfcpart("split meshes/channel_mixed.vtu --from start.csv -n 3 --json").out
    assert min(json.loads(out)["part"]["cells"]) > 800


def test_a_bad_start_gives_one_line(sfcpart):
    np.save("short.npy", np.zeros(5, int))
    np.save("low.npy", np.full(2784, -2))
    np.save("high.npy", np.full(2784, 7))
    mesh = "split meshes/channel_mixed.vtu"
    for call, text in [
        (f"{mesh} --from short.npy", "holds 5 values; wanted 2784"),
        (f"{mesh} --from low.npy", "cell 0 is in part -2"),
        (f"{mesh} --from high.npy -n 4", "cell 0 is in part 7; parts go from 0 to 3"),
        (f"{mesh} --from nowhere", "nowhere: cannot be read"),
        (f"{mesh} --from high.npy -m rows", "--from is a start for --method smoothed"),
    ]:
        code, out, err = sfcpart(call)
        assert (code != 0, out, len(err.splitlines())) == (True, "", 1), err
        assert text in err
