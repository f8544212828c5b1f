"""The other side of transform.mjs: times scipy.fft on request.

Each line of input is "height width images repeats"; the answer is the seconds that one pass over the images took, the
least of two ways: into a new array, and with leave to overwrite the input.
"""

import sys
import time

import numpy as np
import scipy.fft

arrays = {}


def seconds(work, repeats):
    start = time.perf_counter()
    for _ in range(repeats):
        work()
    return (time.perf_counter() - start) / repeats


for line in sys.stdin:
    height, width, images, repeats = map(int, line.split())
    shape = (images, height, width)
    if shape not in arrays:
        parts = np.random.default_rng(1).standard_normal((*shape, 2)).astype(np.float32)
        arrays[shape] = parts.view(np.complex64)[..., 0]
    data = arrays[shape]
    fresh = seconds(lambda: scipy.fft.fft2(data, norm="ortho", workers=1), repeats)
    spare = data.copy()
    inside = seconds(lambda: scipy.fft.fft2(spare, norm="ortho", workers=1, overwrite_x=True), repeats)
    print(min(fresh, inside), flush=True)
