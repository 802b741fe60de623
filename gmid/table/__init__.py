"""Device tables: sweeps of a process in one HDF5 file."""
