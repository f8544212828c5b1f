/**
 * Deterministic random numbers: xoshiro128** (Blackman, Vigna 2021, ACM Trans Math Softw 47:36,
 * doi:10.1145/3460772), turned into Gaussian pairs by Box and Muller 1958, Ann Math Stat 29:610.
 */
export class RandomStream {
  readonly #state: Uint32Array;

  constructor(state: readonly [number, number, number, number]) {
    this.#state = Uint32Array.from(state);
  }

  /** A stream for an integer seed: the four words of state are a 32-bit mix (murmur3's finaliser) of a running count. */
  static fromSeed(seed: number): RandomStream {
    const mixed = (i: number) => mix(Math.imul(i, 0x9e3779b9) + seed);
    return new RandomStream([mixed(1), mixed(2), mixed(3), mixed(4)]);
  }

  /** The next integer in [0, 2^32). */
  nextUint32(): number {
    const s = this.#state;
    const s0 = s[0]!;
    const s1 = s[1]!;
    const s2 = s[2]!;
    const s3 = s[3]!;
    const result = Math.imul(rotateLeft(Math.imul(s1, 5), 7), 9) >>> 0;
    const t = s1 << 9;
    s[2] = s2 ^ s0;
    s[3] = s3 ^ s1;
    s[1] = s1 ^ s[2]!;
    s[0] = s0 ^ s[3]!;
    s[2] = s[2]! ^ t;
    s[3] = rotateLeft(s[3]!, 11);
    return result;
  }

  /**
   * Fill with independent Gaussian numbers of mean 0 and standard deviation 1.
   * @param target even length
   */
  fillGaussian(target: Float64Array): void {
    for (let i = 0; i < target.length; i += 2) {
      const radius = Math.sqrt(-2 * Math.log(this.#nextOpenUnit()));
      const angle = 2 * Math.PI * this.#nextOpenUnit();
      target[i] = radius * Math.cos(angle);
      target[i + 1] = radius * Math.sin(angle);
    }
  }

  /** In (0, 1), never 0, so that its logarithm is finite. */
  #nextOpenUnit(): number {
    return (this.nextUint32() + 0.5) / 2 ** 32;
  }
}

function rotateLeft(x: number, bits: number): number {
  return (x << bits) | (x >>> (32 - bits));
}

function mix(value: number): number {
  let h = value >>> 0;
  h = Math.imul(h ^ (h >>> 16), 0x85ebca6b);
  h = Math.imul(h ^ (h >>> 13), 0xc2b2ae35);
  return (h ^ (h >>> 16)) >>> 0;
}

/**
 * Add noise `scale * L z`, z of independent parts with `E|z|^2 = 1`, to every sample.
 * @param factor  L, [coil, coil] interleaved, lower triangular
 * @param samples interleaved complex64, [coil, sample]; added to
 */
export function addNoise(
  samples: Float32Array | Float64Array,
  factor: Float64Array,
  coils: number,
  random: RandomStream,
  scale = 1,
): void {
  const count = samples.length / (2 * coils);
  const z = new Float64Array(2 * coils);
  for (let n = 0; n < count; n++) {
    random.fillGaussian(z);
    for (let i = 0; i < coils; i++) {
      let re = 0;
      let im = 0;
      for (let j = 0; j <= i; j++) {
        const at = 2 * (i * coils + j);
        re += factor[at]! * z[2 * j]! - factor[at + 1]! * z[2 * j + 1]!;
        im += factor[at]! * z[2 * j + 1]! + factor[at + 1]! * z[2 * j]!;
      }
      const at = 2 * (i * count + n);
      samples[at]! += re * scale * Math.SQRT1_2;
      samples[at + 1]! += im * scale * Math.SQRT1_2;
    }
  }
}
