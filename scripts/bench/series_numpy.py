"""Field map, undisplacing and fat-water separation as a lab would write them with NumPy and SciPy.

usage: series_numpy.py ECHOES2.npy ECHOES3.npy FACTS.json OUT.npz
The arrays are channel images [contrast, slice, coil, y, x]; FACTS.json has echo times and Hz per pixel of both.
Prints seconds a slice as JSON and keeps field, undisplaced image and water of the first slice for comparison.
"""
import heapq
import json
import sys
import time

import numpy as np
from scipy.ndimage import gaussian_filter, map_coordinates

AMPLITUDES = np.array([0.047, 0.039, 0.006, 0.12, 0.7, 0.088])
PPM = np.array([0.6, -0.5, -1.95, -2.6, -3.4, -3.8])  # Hamilton et al. 2011, water at 4.7 ppm


def forward(image):
    """Centred unitary transform along x, to k-space."""
    return np.fft.fftshift(np.fft.fft(np.fft.ifftshift(image, -1), norm="ortho"), -1)


def inverse(lines):
    return np.fft.fftshift(np.fft.ifft(np.fft.ifftshift(lines, -1), norm="ortho"), -1)


def unwrap(phase, weight, mask):
    """Quality-guided flood fill from the strongest pixel of each connected part."""
    out = np.where(mask, phase, 0.0)
    left = mask.copy()
    height, width = phase.shape
    order = np.argsort(-np.where(mask, weight, -1), axis=None)
    for start in order:
        y, x = divmod(int(start), width)
        if not mask[y, x]:
            break
        if not left[y, x]:
            continue
        left[y, x] = False
        heap = []
        at = (y, x)
        while True:
            y, x = at
            for v, u in ((y - 1, x), (y + 1, x), (y, x - 1), (y, x + 1)):
                if 0 <= v < height and 0 <= u < width and left[v, u]:
                    heapq.heappush(heap, (-weight[v, u], v, u, y, x))
            while heap:
                _, v, u, y, x = heapq.heappop(heap)
                if left[v, u]:
                    break
            else:
                break
            left[v, u] = False
            out[v, u] = phase[v, u] + 2 * np.pi * np.round((out[y, x] - phase[v, u]) / (2 * np.pi))
            at = (v, u)
    return out


def to_object(field, pixel_hz):
    """object(x) = image(x + field / bandwidth), by fixed-point iteration."""
    height, width = field.shape
    rows, columns = np.mgrid[:height, :width].astype(float)
    place = columns
    for _ in range(6):
        place = columns + map_coordinates(field, [rows, place], order=3, mode="nearest") / pixel_hz
    return map_coordinates(field, [rows, place], order=3, mode="nearest")


def smooth(field, weight, sigma=2.0):
    """Weighted smoothing; ever wider windows fill what holds no signal."""
    out = np.zeros_like(field)
    known = np.zeros(field.shape, bool)
    for width in (sigma, 4 * sigma, 16 * sigma, 64 * sigma):
        total = gaussian_filter(weight, width)
        fresh = (total > 0.02 * weight.max()) & ~known
        out[fresh] = (gaussian_filter(weight * field, width)[fresh]) / total[fresh]
        known |= fresh
    return out


def field_map(echoes, seconds, pixel_hz):
    """Two echoes [contrast, coil, y, x]."""
    product = (echoes[1] * echoes[0].conj()).sum(0)
    weight = np.abs(product)
    mask = weight > 0.01 * np.percentile(weight, 99)
    radians = unwrap(np.angle(product), weight, mask)
    field = -radians / (2 * np.pi * (seconds[1] - seconds[0]))
    return to_object(smooth(field, np.where(mask, weight, 0.0)), pixel_hz)


def undisplace(images, field, seconds, pixel_hz):
    """Band-limited interpolation by a fourfold finer grid and cubic splines, times the Jacobian; [coil, y, x]."""
    coils, height, width = images.shape
    shift = field / pixel_hz
    jacobian = 1 + np.gradient(shift, axis=1)
    rows, columns = np.mgrid[:height, :width].astype(float)
    padded = np.zeros((coils, height, 4 * width), complex)
    padded[..., 3 * width // 2 : 5 * width // 2] = forward(images)
    fine = 2 * inverse(padded)
    place = [rows, 4 * (columns - width // 2 + shift) + 2 * width]
    out = np.empty_like(images)
    for c in range(coils):
        re = map_coordinates(fine[c].real, place, order=3, mode="wrap")
        im = map_coordinates(fine[c].imag, place, order=3, mode="wrap")
        out[c] = (re + 1j * im) * jacobian
    return out


def combine(echoes):
    """One set of channel weights for all echoes: the strongest eigenvector of the local channel covariance."""
    _, coils, height, width = echoes.shape
    block = 8
    blocks = echoes.reshape(-1, coils, height // block, block, width // block, block).sum((3, 5))
    covariance = np.einsum("ecyx,edyx->yxcd", blocks, blocks.conj())
    vector = np.ones((height // block, width // block, coils), complex) / np.sqrt(coils)
    for _ in range(4):
        vector = np.einsum("yxcd,yxd->yxc", covariance, vector)
        vector /= np.linalg.norm(vector, axis=-1, keepdims=True) + 1e-30
    vector *= np.exp(-1j * np.angle(vector[..., :1]))
    weights = np.repeat(np.repeat(vector, block, 0), block, 1)
    return np.einsum("yxc,ecyx->eyx", weights.conj(), echoes)


def separate(echoes, seconds, pixel_hz, resonance_hz):
    """Water and fat at exact sampling times, over candidate fields on a coarse grid, then one solution."""
    images = combine(echoes)
    count, height, width = images.shape
    k = np.arange(width) - width // 2
    tau = np.array(seconds)[:, None] + k / (width * np.array(pixel_hz)[:, None])
    hz = PPM * 1e-6 * resonance_hz
    fat = (AMPLITUDES * np.exp(-2j * np.pi * hz * tau[..., None])).sum(-1)
    system = np.stack([np.ones_like(fat), fat], -1).transpose(1, 0, 2)  # [k, echo, species]
    solve = np.linalg.pinv(system)
    remain = np.eye(count) - system @ solve
    limit = 1 / (2 * np.min(np.diff(seconds)))
    candidates = np.linspace(-limit, limit, 64, endpoint=False)
    step = 2
    rows, columns = np.mgrid[:height:step, :width].astype(float)
    energy = []
    for offset in candidates:
        straight = []
        for e in range(count):
            turn = np.exp(2j * np.pi * offset * tau[e])
            straight.append(forward(images[e][::step]) * turn)
        left = np.einsum("kef,fyk->eyk", remain, np.array(straight))
        energy.append(gaussian_filter((np.abs(inverse(left)) ** 2).sum(0), 3))
    energy = np.array(energy)
    # smooth choice: the cheapest candidate, then two rounds that follow the neighbours
    choice = candidates[energy.argmin(0)]
    strength = gaussian_filter((np.abs(images[:, ::step]) ** 2).sum(0), 3)
    for _ in range(2):
        mean = gaussian_filter(choice * strength, 6) / (gaussian_filter(strength, 6) + 1e-30)
        price = energy + strength * np.abs(candidates[:, None, None] - mean) / 400
        choice = candidates[price.argmin(0)]
    field = smooth(np.repeat(choice, step, 0), np.repeat(strength, step, 0), 2)
    for _ in range(2):
        rows, columns = np.mgrid[:height, :width].astype(float)
        straight = []
        for e in range(count):
            moved = undisplace(images[e][None], field, seconds[e], pixel_hz[e])[0]
            straight.append(forward(moved * np.exp(2j * np.pi * field * seconds[e])))
        straight = np.array(straight)
        species = np.einsum("kse,eyk->syk", solve, straight)
        left = inverse(straight - np.einsum("kes,syk->eyk", system, species))
        signal = inverse(np.einsum("kes,syk->eyk", system, species))
        slope = -2j * np.pi * np.array(seconds)[:, None, None] * signal
        gain = (np.abs(slope) ** 2).sum(0)
        change = (slope.conj() * left).real.sum(0) / (gain + 1e-3 * gain.max())
        field = field + smooth(change, gain, 2)
    return np.abs(inverse(species[0])), field


def timed(work, slices):
    start = time.perf_counter()
    first = [work(s) for s in range(slices)][0]
    return (time.perf_counter() - start) / slices, first


def main():
    two, three = np.load(sys.argv[1]), np.load(sys.argv[2])
    facts = json.load(open(sys.argv[3]))
    a, b = facts["two"], facts["three"]
    slices = two.shape[1]
    fields = {}

    def measure(s):
        fields[s] = field_map(two[:, s], a["seconds"], a["pixelHz"][0])
        return fields[s]

    seconds, field = timed(measure, slices)
    out = {"field-map": seconds}

    def put_back(s):
        return [undisplace(two[e, s], fields[s], a["seconds"][e], a["pixelHz"][e]) for e in (0, 1)]

    out["undisplace"], straight = timed(put_back, slices)
    out["separate-fat-water"], (water, _) = timed(
        lambda s: separate(three[:, s], b["seconds"], b["pixelHz"], b["resonanceHz"]), slices
    )
    image = np.sqrt((np.abs(straight[0]) ** 2).sum(0))
    np.savez(sys.argv[4], field=field, image=image, water=water)
    print(json.dumps(out))


main()
