"""Run files: in memory and HDF5.

`hdf5.HDF5Store` and `memory.MemoryStore` write runs, `hdf5.read_run` and `hdf5.open_for_resume` open them
again, `naming` lists and finds them, `signature` tells what was computed, `checking` whether a file agrees
with itself. Nothing is imported here, so that listing runs does not pay for more than it uses.
"""
