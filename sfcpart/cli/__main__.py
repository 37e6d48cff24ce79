"""`python -m sfcpart.cli` is the same as `sfcpart`."""

from sfcpart.cli import main

main()
