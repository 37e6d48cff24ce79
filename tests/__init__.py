"""The test suite; it tests the sfcpart that it finds first on the path (see DEVELOPERS.md)."""
