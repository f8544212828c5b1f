#!/usr/bin/env python3
"""Print src/simulate/template.ts: an empty raw-data file, gzip-compressed, in base64.

The HDF5 library that the program uses can neither create the record type of the raw-data standard (a compound with
variable-length members) nor leave out time stamps; it can fill a file that has the type already. So the file is made
once, here, in the layout that the standard's own library writes: group `dataset`, `xml` (one variable-length ASCII
string), `data` (records of a 340-byte head, trajectory, samples), no time stamps.

Usage: make-template.py > src/simulate/template.ts
Needs: python3 with h5py and numpy.
"""
import base64
import gzip
import os
import tempfile
import textwrap

import h5py
import numpy as np

COUNTERS = ("kspace_encode_step_1", "kspace_encode_step_2", "average", "slice", "contrast", "phase", "repetition", "set", "segment")
IDX = np.dtype([(name, "<u2") for name in COUNTERS] + [("user", "<u2", (8,))])
HEAD = np.dtype([
    ("version", "<u2"), ("flags", "<u8"), ("measurement_uid", "<u4"), ("scan_counter", "<u4"),
    ("acquisition_time_stamp", "<u4"), ("physiology_time_stamp", "<u4", (3,)), ("number_of_samples", "<u2"),
    ("available_channels", "<u2"), ("active_channels", "<u2"), ("channel_mask", "<u8", (16,)),
    ("discard_pre", "<u2"), ("discard_post", "<u2"), ("center_sample", "<u2"), ("encoding_space_ref", "<u2"),
    ("trajectory_dimensions", "<u2"), ("sample_time_us", "<f4"), ("position", "<f4", (3,)), ("read_dir", "<f4", (3,)),
    ("phase_dir", "<f4", (3,)), ("slice_dir", "<f4", (3,)), ("patient_table_position", "<f4", (3,)), ("idx", IDX),
    ("user_int", "<i4", (8,)), ("user_float", "<f4", (8,))])
assert HEAD.itemsize == 340  # as the standard says
FLOATS = h5py.vlen_dtype(np.dtype("<f4"))
RECORD = np.dtype([("head", HEAD), ("traj", FLOATS), ("data", FLOATS)])
CHUNK_RECORDS = 64

with tempfile.TemporaryDirectory() as folder:
    path = os.path.join(folder, "template.h5")
    with h5py.File(path, "w", libver="earliest") as file:
        group = file.create_group("dataset")
        group.create_dataset("xml", (1,), dtype=h5py.string_dtype("ascii"), track_times=False)
        group.create_dataset("data", (0,), dtype=RECORD, maxshape=(None,), chunks=(CHUNK_RECORDS,), track_times=False)
    with open(path, "rb") as file:
        packed = base64.b64encode(gzip.compress(file.read(), mtime=0)).decode()

lines = textwrap.wrap(packed, 96)
print("/**")
print(" * An empty raw-data file (HDF5, gzip, base64), made by scripts/make-template.py: change it there.")
print(" */")
print("export const TEMPLATE_GZIP_BASE64 =")
print("\n".join(f'  "{line}"{";" if i == len(lines) - 1 else " +"}' for i, line in enumerate(lines)))
