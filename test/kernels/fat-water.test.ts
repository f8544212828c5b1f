import { describe, expect, it } from "vitest";
import { fatFraction, threePointDixon, twoPointDixon } from "../../src/kernels/fat-water.js";
import { fitMagnitudes } from "../../src/kernels/magnitude-fit.js";

const SIZE = { slices: 3, rows: 10, columns: 12 };
const COUNT = 360;
const everywhere = new Uint8Array(COUNT).fill(1);

/** Echo with fat turned by `fatRadians`, the field by `fieldRadians` per pixel, and a phase of its own. */
function echo(
  water: (i: number) => number,
  fat: (i: number) => number,
  fatRadians: number,
  field: (i: number) => number,
) {
  const out = new Float32Array(2 * COUNT);
  for (let i = 0; i < COUNT; i++) {
    const [re, im] = [water(i) + fat(i) * Math.cos(fatRadians), fat(i) * Math.sin(fatRadians)];
    const angle = 0.7 + 0.02 * i + field(i);
    out[2 * i] = re * Math.cos(angle) - im * Math.sin(angle);
    out[2 * i + 1] = re * Math.sin(angle) + im * Math.cos(angle);
  }
  return out;
}
const water = (i: number) => (i % 12 < 7 ? 1 : 0.2);
const fat = (i: number) => (i % 12 < 7 ? 0.1 : 0.9);
const field = (i: number) => 0.35 * (i % 12) - 0.2 * (Math.floor(i / 12) % 10);

describe("twoPointDixon", () => {
  it("gives water .7 and fat .3 for 1.0 and .4 [computed with NumPy: S8]", () => {
    const pair = [1, 0.4].map((value) => new Float32Array(2).fill(0).map((_, i) => (i === 0 ? value : 0)));
    const { water: w, fat: f } = twoPointDixon(pair[0]!, pair[1]!, Uint8Array.from([1]), {
      slices: 1,
      rows: 1,
      columns: 1,
    });
    expect(w[0]).toBeCloseTo(0.7, 6);
    expect(f[0]).toBeCloseTo(0.3, 6);
  });

  it("tells the signs apart under a field of several turns", () => {
    const {
      water: w,
      fat: f,
      radians,
    } = twoPointDixon(
      echo(water, fat, 0, () => 0),
      echo(water, fat, Math.PI, field),
      everywhere,
      SIZE,
    );
    for (let i = 0; i < COUNT; i++) {
      expect(w[i]).toBeCloseTo(water(i), 5); // float32
      expect(f[i]).toBeCloseTo(fat(i), 5);
      expect(Math.cos(radians[i]! - field(i))).toBeCloseTo(1, 5);
    }
  });
});

describe("threePointDixon", () => {
  it("takes the field from the first and the third echo", () => {
    const images = [0, 1, 2].map((n) => echo(water, fat, n * Math.PI, (i) => n * field(i))) as [
      Float32Array,
      Float32Array,
      Float32Array,
    ];
    const { water: w, fat: f, radians } = threePointDixon(...images, everywhere, SIZE);
    for (let i = 0; i < COUNT; i++) {
      expect(w[i]).toBeCloseTo(water(i), 5);
      expect(f[i]).toBeCloseTo(fat(i), 5);
      expect(Math.cos(radians[i]! - field(i))).toBeCloseTo(1, 5);
    }
  });

  it("calls the prevailing species water where nothing else decides", () => {
    const images = [0, 1, 2].map((n) =>
      echo(
        () => 0.1,
        () => 1,
        n * Math.PI,
        () => 0,
      ),
    ) as [Float32Array, Float32Array, Float32Array];
    expect(threePointDixon(...images, everywhere, SIZE).water[5]).toBeCloseTo(1, 5);
  });
});

describe("fatFraction", () => {
  it("is the share of fat, by the larger species", () => {
    const w = Float32Array.from([3, 0, 0, 1, 0.5, 0, 0, 0]);
    const f = Float32Array.from([1, 0, 0, 3, 0, 0, 1, 0]);
    expect([...fatFraction(w, f, [1, 1, 1, 0])]).toEqual([0.25, 0.75, 0, 0]);
  });
});

describe("fitMagnitudes", () => {
  // Hamilton et al. 2011 at 1.5 T [from memory]
  const peaks = [
    [0.6, 0.047],
    [-0.5, 0.039],
    [-1.95, 0.006],
    [-2.6, 0.12],
    [-3.4, 0.7],
    [-3.8, 0.088],
  ] as const;
  const seconds = [1, 2, 3, 4, 5, 6].map((n) => 0.0023 * n);
  const signals = seconds.flatMap((t) => {
    const angles = peaks.map(([ppm, share]) => [-2 * Math.PI * ppm * 63.866 * t, share] as const);
    const sum = (part: (angle: number) => number) =>
      angles.reduce((all, [angle, share]) => all + share * part(angle), 0);
    return [sum(Math.cos), sum(Math.sin)];
  });

  it.each([
    [1, 0, 0],
    [0.8, 0.2, 30],
    [0.5, 0.5, 60],
    [0.1, 0.9, 45],
    [0, 1, 10],
  ])("recovers water %f, fat %f and R2* %f from magnitudes alone", (w, f, rate) => {
    const data = seconds.map((t, e) =>
      Float32Array.of(Math.hypot(w + f * signals[2 * e]!, f * signals[2 * e + 1]!) * Math.exp(-rate * t)),
    );
    const fit = fitMagnitudes(data, seconds, signals, true, [1]);
    expect(fit.water[0]).toBeCloseTo(w, 3); // twenty steps of a damped search on float32 data
    expect(fit.fat[0]).toBeCloseTo(f, 3);
    expect(Math.abs(fit.decayPerSecond[0]! - rate)).toBeLessThan(0.2);
    expect(fit.residual[0]).toBeLessThan(1e-3);
  });

  it("leaves out what is masked, and R2* where it is not wanted", () => {
    const data = seconds.map(() => Float32Array.of(1, 1));
    const fit = fitMagnitudes(data, seconds, signals, false, [0, 1]);
    expect([fit.water[0], fit.fat[0], fit.residual[0]]).toEqual([0, 0, 0]);
    expect(fit.water[1]).toBeCloseTo(1, 3);
    expect(fit.decayPerSecond[1]).toBe(0);
  });
});
