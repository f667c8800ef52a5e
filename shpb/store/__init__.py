"""Results out and in again: one HDF5 file a shot, curves as CSV. The only h5py in the package."""
