"""Third floor: text and HDF5 at the edge. The only place where units are converted."""
