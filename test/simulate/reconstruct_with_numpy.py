"""Coil images of a Cartesian raw-data file with NumPy's transform. Usage: reconstruct_with_numpy.py RAW.h5 OUT.bin

Places samples by the head and the header alone, averages by mean, transforms (centred, unitary), keeps the central
columns. OUT.bin: complex128, [contrast, slice, coil, y, x]."""
import re
import sys

import h5py
import numpy as np

NOISE, REVERSE = 1 << 18, 1 << 21

with h5py.File(sys.argv[1], "r") as file:
    xml = file["dataset/xml"][0].decode()
    rows = [r for r in file["dataset/data"][:] if not int(r["head"]["flags"]) & NOISE]
matrices = [tuple(int(n) for n in m) for m in re.findall(r"<matrixSize><x>(\d+)</x><y>(\d+)</y>", xml)]
(nx, ny), (keep, _) = matrices
center = int(re.search(r"<kspace_encoding_step_1>.*?<center>(\d+)</center>", xml).group(1))
heads = [r["head"] for r in rows]
coils = int(heads[0]["active_channels"])
shape = (max(h["idx"]["contrast"] for h in heads) + 1, max(h["idx"]["slice"] for h in heads) + 1, coils, ny, nx)
k, hits = np.zeros(shape, complex), np.zeros(shape[:2] + (ny,), int)
for row, head in zip(rows, heads):
    data = row["data"].view(np.complex64).reshape(coils, -1)
    middle = int(head["center_sample"])
    if int(head["flags"]) & REVERSE:
        data, middle = data[:, ::-1], data.shape[1] - 1 - middle
    first = nx // 2 - middle
    contrast, slc = head["idx"]["contrast"], head["idx"]["slice"]
    line = int(head["idx"]["kspace_encode_step_1"]) - center + ny // 2
    k[contrast, slc, :, line, first : first + data.shape[1]] += data
    hits[contrast, slc, line] += 1
k /= np.maximum(hits, 1)[:, :, None, :, None]
axes = (-2, -1)
image = np.fft.fftshift(np.fft.ifftn(np.fft.ifftshift(k, axes), axes=axes, norm="ortho"), axes)
low = nx // 2 - keep // 2
np.ascontiguousarray(image[..., low : low + keep]).tofile(sys.argv[2])
