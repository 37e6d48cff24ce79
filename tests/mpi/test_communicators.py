"""`MpiComm` takes any communicator of mpi4py and keeps its messages to itself."""

from __future__ import annotations

import json

from tests.mpi.harness import run_job


def test_halves_and_selves(tmp_path):
    run_job("tests.mpi.communicators_job", 4, tmp_path)
    seen = [json.loads((tmp_path / f"rank{r}.json").read_text()) for r in range(4)]
    assert [rank["half"] for rank in seen] == [
        [1, 2, [[2, 1], [0, 1]]],
        [1, 2, [[3, 1], [1, 1]]],
        [0, 2, [[2, 0], [0, 0]]],
        [0, 2, [[3, 0], [1, 0]]],
    ]
    assert [rank["alone"] for rank in seen] == [[0, 1, [0]]] * 4
    assert [rank["pending"] for rank in seen] == ["ours"] * 4
    assert [rank["adopted"] for rank in seen] == [[True, True, True]] * 4
    assert [rank["freed"] for rank in seen] == [1] * 4
    assert [rank["refused"] for rank in seen] == [
        [
            "InputError: comm is 'nothing'; wanted a communicator of mpi4py or of sfcpart.comm",
            "InputError: a communicator without ranks or between groups; wanted one group of ranks",
        ]
    ] * 4
