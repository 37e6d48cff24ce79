"""Series of our own invention for `sfcpart replay`: the work moves through the Skerry Channel.

    python -m tools.series front front.h5            # a tidal front sweeps a box, refined around it
    python -m tools.series spots spots.h5            # burning spots move over one mesh
    python -m tools.series slow slow.h5              # one rank is slow for a while
    python -m tools.series front small.h5 --size 8 --levels 2 --frames 12

The layout of the files is that of `sfcpart.files.series.hdf5_series`. Everything is by rule: the
same call gives the same bytes. Frames are made one by one; two meshes at a time are in memory.
`front_series`, `spot_series` and `slow_series` give the frames without a file.
"""
