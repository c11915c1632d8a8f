"""Run files: in memory and HDF5."""
