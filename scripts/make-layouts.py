#!/usr/bin/env python3
"""The same little scan in every layout in which raw files occur: OUT_DIR/LAYOUT.h5 and the answer, OUT_DIR/k-space.npy.

Usage: make-layouts.py OUT_DIR (data/layouts). Needs python3 with h5py and numpy (Debian: python3-h5py python3-numpy).
8 lines of 8 samples, 2 channels; k-space.npy is [coil, y, x], complex64.
"""
import os
import sys

import h5py
import numpy as np

sys.path.insert(0, os.path.join(os.path.dirname(os.path.abspath(__file__)), "conformance"))
from make_conformance import HEAD, header  # noqa: E402

N, COILS = 8, 2
rng = np.random.default_rng(11)
K = (rng.standard_normal((COILS, N, N)) + 1j * rng.standard_normal((COILS, N, N))).astype(np.complex64)
K[:, :, N // 2] = 30  # neighbouring lines alike, as of an object in the middle
XML = header(1.5, COILS, [dict(enc=((N, N, 1), (80.0, 80.0, 5.0)), rec=((N, N, 1), (80.0, 80.0, 5.0)), trajectory="cartesian",
             limits={"kspace_encoding_step_1": (0, N - 1, N // 2)})])
PREFIXED = XML.replace('xmlns="', 'xmlns:m="').replace("</", "</m:").replace("<m:?", "<?")
for tag in ("ismrmrdHeader", "acquisitionSystemInformation", "systemFieldStrength_T", "receiverChannels", "experimentalConditions",
            "H1resonanceFrequency_Hz", "encodingLimits", "encodedSpace", "encoding", "reconSpace", "matrixSize", "fieldOfView_mm",
            "kspace_encoding_step_1", "minimum", "maximum", "center", "trajectory", "x", "y", "z"):
    PREFIXED = PREFIXED.replace(f"<{tag}>", f"<m:{tag}>").replace(f"<{tag} ", f"<m:{tag} ")


def moved(dtype, order):
    """The same members in another order."""
    return np.dtype([(n, dtype[n]) for n in order])


def record(head=HEAD, floats="<f4", itemsize=None, order=("head", "traj", "data")):
    vlen = h5py.vlen_dtype(np.dtype(floats))
    members = {"head": head, "traj": vlen, "data": vlen}
    if itemsize is None:
        return np.dtype([(n, members[n]) for n in order])
    step = (itemsize - head.itemsize) // 2
    return np.dtype({"names": list(order), "formats": [members[n] for n in order],
                     "offsets": [0, head.itemsize, head.itemsize + step], "itemsize": itemsize})


def rows(dtype, floats="<f4"):
    out = np.zeros(N, dtype)
    for line in range(N):
        h = np.zeros((), dtype["head"])
        h["version"], h["scan_counter"], h["number_of_samples"] = 1, line, N
        h["available_channels"], h["active_channels"], h["center_sample"] = COILS, COILS, N // 2
        h["sample_time_us"], h["read_dir"], h["phase_dir"], h["slice_dir"] = 5.0, (1, 0, 0), (0, 1, 0), (0, 0, 1)
        h["idx"]["kspace_encode_step_1"] = line
        out[line]["head"] = h
        out[line]["traj"] = np.zeros(0, floats)
        out[line]["data"] = np.ascontiguousarray(K[:, line]).view("<f4").ravel().astype(floats)
    return out


def write(folder, name, dtype=None, floats="<f4", shape=(N,), group="dataset", xml=XML, text="vlen-ascii", **kw):
    dtype = record(floats=floats) if dtype is None else dtype
    with h5py.File(os.path.join(folder, name + ".h5"), "w", libver="earliest") as f:
        g = f.create_group(group)
        if text == "fixed":
            g.create_dataset("xml", data=np.array([xml.encode()], dtype=f"S{len(xml)}"))
        elif text == "scalar-utf8":
            g.create_dataset("xml", data=xml, dtype=h5py.string_dtype("utf-8"))
        else:
            g.create_dataset("xml", (1,), dtype=h5py.string_dtype("ascii"))[0] = xml
        d = g.create_dataset("data", shape, dtype=dtype, **kw)
        d[...] = rows(dtype, floats).reshape(shape)


def swapped(dtype):
    """A head with big-endian numbers."""
    return dtype.newbyteorder(">")


def main():
    folder = sys.argv[1]
    os.makedirs(folder, exist_ok=True)
    np.save(os.path.join(folder, "k-space.npy"), K)
    write(folder, "packed")
    for size in (360, 372, 376):
        # 372 and 376 hold 16-byte variable-length entries, as 64-bit libraries lay them out in memory
        write(folder, f"record-{size}", record(itemsize=size))
    write(folder, "members-reordered", record(head=moved(HEAD, sorted(HEAD.names)), order=("data", "head", "traj")))
    write(folder, "big-endian", record(head=swapped(HEAD), floats=">f4"), floats=">f4")
    write(folder, "mixed-byte-order", record(head=swapped(HEAD), floats="<f4"))
    write(folder, "float64", floats="<f8")
    write(folder, "big-endian-float64", floats=">f8")
    write(folder, "column", shape=(N, 1))
    write(folder, "row", shape=(1, N))
    write(folder, "contiguous")
    write(folder, "chunked-gzip-shuffle", chunks=(3,), compression="gzip", shuffle=True)
    write(folder, "chunked-fletcher32", chunks=(1,), fletcher32=True, maxshape=(None,))
    write(folder, "nested-group", group="study/scan 3/raw")
    write(folder, "header-fixed-length", text="fixed")
    write(folder, "header-scalar-utf8", text="scalar-utf8")
    write(folder, "header-prefixed", xml=PREFIXED)
    write(folder, "header-unknown-elements", xml=XML.replace("<encoding>", "<vendorExtra><y>7</y></vendorExtra><encoding>"))


if __name__ == "__main__":
    main()
