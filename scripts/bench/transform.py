"""The other side of transform.mjs: times scipy.fft on request.

Each line of input is "height width images repeats"; the answer is the seconds that one pass over the images took, with
leave to overwrite the input and into a new array.
"""

import sys
import time

import numpy as np
import scipy.fft

arrays = {}


def seconds(data, repeats, overwrite):
    start = time.perf_counter()
    for _ in range(repeats):
        scipy.fft.fft2(data, norm="ortho", workers=1, overwrite_x=overwrite)
    return (time.perf_counter() - start) / repeats


for line in sys.stdin:
    height, width, images, repeats = map(int, line.split())
    shape = (images, height, width)
    if shape not in arrays:
        parts = np.random.default_rng(1).standard_normal((*shape, 2)).astype(np.float32)
        arrays[shape] = parts.view(np.complex64)[..., 0]
    data = arrays[shape]
    spare = data.copy()
    seconds(spare, 3, True)  # brings the copy into the cache, as the repeats find it
    print(seconds(spare, repeats, True), seconds(data, repeats, False), flush=True)
