"""What only one rank can promise: nothing is copied."""

from __future__ import annotations

import numpy as np

from sfcpart.comm import SerialComm


def test_bulk_arrays_pass_through_uncopied():
    comm = SerialComm()
    array = np.arange(6.0).reshape(2, 3)
    assert comm.alltoall([array])[0] is array
    assert comm.allgather(array)[0] is array
    assert comm.bcast(array) is array
    whole = np.arange(4, dtype=np.int64)
    assert comm.allreduce(whole) is whole


def test_an_error_keeps_its_identity():
    error = KeyError("here")
    try:
        SerialComm().check(error)
    except KeyError as raised:
        assert raised is error
    else:
        raise AssertionError("nothing was raised")
