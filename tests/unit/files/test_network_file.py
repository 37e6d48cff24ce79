"""Files of measured networks: read back, by place, and refused when they are none."""

from __future__ import annotations

import json

import pytest

from sfcpart.errors import FileError
from sfcpart.files.network_file import network_file_content, read_network_file

ROWS = {
    "on-node": {"latency": 1e-6, "bandwidth": 8e9},
    "across-nodes": {"latency": 3e-6, "bandwidth": 12e9},
}


def written(tmp_path, **held):
    """Write a file."""
    path = tmp_path / "network.json"
    path.write_text(json.dumps(network_file_content({"ranks": 4, "networks": ROWS, **held})))
    return path


def test_the_slower_place_is_read_unless_another_is_asked_for(tmp_path):
    path = written(tmp_path)
    assert read_network_file(path)[:3] == ("network.json, across-nodes", 3e-6, 12e9)
    name, latency, bandwidth, source = read_network_file(path, where="on-node")
    assert (name, latency, bandwidth) == ("network.json, on-node", 1e-6, 8e9)
    assert source == "measured on-node between 4 ranks, network.json"
    path = written(tmp_path, networks={"on-node": ROWS["on-node"]})
    assert read_network_file(path)[0] == "network.json, on-node"


@pytest.mark.parametrize(
    ("held", "message"),
    [
        ({"networks": {}}, "has no network at all; it has none"),
        ({"networks": 3}, "is no file of a measured network"),
        ({"networks": {"on-node": {"latency": 1}}}, "bandwidth is None; wanted a number"),
        ({"networks": {"on-node": {"latency": -1, "bandwidth": 1}}}, "latency is -1"),
        ({"networks": {"on-node": {"latency": 1, "bandwidth": 0}}}, "bandwidth is 0"),
        ({"networks": {"on-node": {"latency": True, "bandwidth": 1}}}, "latency is True"),
        ({"sfcpart_network": 2}, "is of version 2; this sfcpart reads 1"),
    ],
)
def test_other_files_are_refused(tmp_path, held, message):
    with pytest.raises(FileError, match=message):
        read_network_file(written(tmp_path, **held))


def test_what_cannot_be_read_is_refused(tmp_path):
    with pytest.raises(FileError, match="cannot be read: No such file"):
        read_network_file(tmp_path / "none.json")
    (tmp_path / "text.json").write_text("no json")
    with pytest.raises(FileError, match="wanted one that `sfcpart network` wrote"):
        read_network_file(tmp_path / "text.json")
    only = written(tmp_path, networks={"on-node": ROWS["on-node"]})
    with pytest.raises(FileError, match="has no network across-nodes; it has on-node"):
        read_network_file(only, where="across-nodes")
