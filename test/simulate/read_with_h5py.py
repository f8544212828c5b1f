"""Read a raw-data file with h5py. Usage: read_with_h5py.py RAW.h5 OUT.bin

OUT.bin: for each acquisition its head (340 bytes, as stored), then its samples (complex64)."""
import sys

import h5py

with h5py.File(sys.argv[1], "r") as file, open(sys.argv[2], "wb") as out:
    for record in file["dataset/data"][:]:
        assert record["head"].dtype.itemsize == 340
        assert len(record["traj"]) == 0
        out.write(record["head"].tobytes())
        out.write(record["data"].tobytes())
