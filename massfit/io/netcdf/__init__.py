"""NetCDF and HDF5 files, opened behind a guard."""
