/**
 * Water and fat from the magnitudes of echoes: `|W + F c(TE)| exp(-R2* TE)`, W, F >= 0 and in phase at time zero. Phase
 * errors do not matter; which of the two solutions (the same magnitudes come near from water and fat exchanged) is right,
 * the several peaks of fat decide: both are fitted, and the one that leaves less is kept.
 *
 * Source: Bydder et al. 2008, Magn Reson Imaging 26:347, doi:10.1016/j.mri.2007.08.012; both starts: Triay Bagur et al.
 * 2019, Magn Reson Med 82:460.
 */
export interface MagnitudeFit {
  readonly water: Float32Array;
  readonly fat: Float32Array;
  /** 1 / s; zero where not fitted. */
  readonly decayPerSecond: Float32Array;
  /** Root of the summed squared differences over the echoes. */
  readonly residual: Float32Array;
}

const STEPS = 20;

/**
 * @param magnitudes one real map for each echo, all of one length
 * @param echoSeconds echo times
 * @param fatSignals complex signal of unit fat at each echo time, interleaved
 * @param fitDecay  whether R2* is fitted (needs 4 echoes to be decided) or taken as zero
 * @param mask      1 where to fit; zero elsewhere
 */
export function fitMagnitudes(
  magnitudes: readonly Float32Array[],
  echoSeconds: readonly number[],
  fatSignals: ArrayLike<number>,
  fitDecay: boolean,
  mask: ArrayLike<number>,
): MagnitudeFit {
  const size = magnitudes[0]!.length;
  const out = {
    water: new Float32Array(size),
    fat: new Float32Array(size),
    decayPerSecond: new Float32Array(size),
    residual: new Float32Array(size),
  };
  const pixel = new PixelFit(echoSeconds, fatSignals, fitDecay);
  for (let p = 0; p < size; p++) {
    if (!mask[p]) continue;
    for (let e = 0; e < magnitudes.length; e++) pixel.data[e] = magnitudes[e]![p]!;
    const level = pixel.data.reduce((most, value) => Math.max(most, value), 0);
    const asWater = pixel.solve(0.9 * level, 0.1 * level);
    const asFat = pixel.solve(0.1 * level, 0.9 * level);
    const best = asFat.cost < asWater.cost ? asFat : asWater;
    out.water[p] = best.water;
    out.fat[p] = best.fat;
    out.decayPerSecond[p] = best.decay;
    out.residual[p] = Math.sqrt(best.cost);
  }
  return out;
}

interface Solution {
  readonly water: number;
  readonly fat: number;
  readonly decay: number;
  readonly cost: number;
}

/** Levenberg-Marquardt on water, fat and R2* of one pixel. */
class PixelFit {
  readonly data: Float64Array;
  readonly #normal = new Float64Array(9);
  readonly #right = new Float64Array(3);

  constructor(
    private readonly echoSeconds: readonly number[],
    private readonly fatSignals: ArrayLike<number>,
    private readonly fitDecay: boolean,
  ) {
    this.data = new Float64Array(echoSeconds.length);
  }

  solve(water: number, fat: number): Solution {
    let at: Solution = { water, fat, decay: 0, cost: this.#cost(water, fat, 0) };
    let damping = 1e-3;
    for (let step = 0; step < STEPS; step++) {
      this.#linearize(at);
      const [dw, df, dr] = this.#solveDamped(damping);
      const [w, f, r] = [Math.max(0, at.water + dw), Math.max(0, at.fat + df), Math.max(0, at.decay + dr)];
      const cost = this.#cost(w, f, r);
      if (cost < at.cost) {
        at = { water: w, fat: f, decay: r, cost };
        damping /= 10;
      } else {
        damping *= 10;
      }
    }
    return at;
  }

  #cost(water: number, fat: number, decay: number): number {
    let sum = 0;
    for (let e = 0; e < this.data.length; e++) {
      const re = water + fat * this.fatSignals[2 * e]!;
      const im = fat * this.fatSignals[2 * e + 1]!;
      sum += (Math.hypot(re, im) * Math.exp(-decay * this.echoSeconds[e]!) - this.data[e]!) ** 2;
    }
    return sum;
  }

  #linearize({ water, fat, decay }: Solution): void {
    this.#normal.fill(0);
    this.#right.fill(0);
    for (let e = 0; e < this.data.length; e++) {
      const c = this.fatSignals[2 * e]!;
      const s = this.fatSignals[2 * e + 1]!;
      const fade = Math.exp(-decay * this.echoSeconds[e]!);
      const size = Math.hypot(water + fat * c, fat * s) || 1e-30;
      const slopes = [
        (fade * (water + fat * c)) / size,
        (fade * (water * c + fat * (c * c + s * s))) / size,
        this.fitDecay ? -this.echoSeconds[e]! * size * fade : 0,
      ];
      const left = this.data[e]! - size * fade;
      for (let i = 0; i < 3; i++) {
        this.#right[i]! += slopes[i]! * left;
        for (let j = 0; j < 3; j++) this.#normal[3 * i + j]! += slopes[i]! * slopes[j]!;
      }
    }
  }

  /** The 3 x 3 system with its diagonal raised, by elimination; R2* stays where it is if not fitted. */
  #solveDamped(damping: number): [number, number, number] {
    const a = this.#normal.map((value, i) =>
      i % 4 === 0 ? value * (1 + damping) + (value === 0 ? 1 : 0) : value,
    );
    const b = this.#right.slice();
    for (let i = 0; i < 3; i++) {
      for (let row = i + 1; row < 3; row++) {
        const gain = a[3 * row + i]! / a[3 * i + i]!;
        for (let j = i; j < 3; j++) a[3 * row + j]! -= gain * a[3 * i + j]!;
        b[row]! -= gain * b[i]!;
      }
    }
    const z = b[2]! / a[8]!;
    const y = (b[1]! - a[5]! * z) / a[4]!;
    return [(b[0]! - a[1]! * y - a[2]! * z) / a[0]!, y, z];
  }
}
