/** Seconds by part of the work; what `--timings` prints. Parts of several threads add up. */
export class Timings {
  #seconds: Record<string, number> = {};

  /** Run `work` and count its time under `part`. */
  measure<T>(part: string, work: () => T): T {
    const start = performance.now();
    try {
      return work();
    } finally {
      this.add(part, (performance.now() - start) / 1e3);
    }
  }

  add(part: string, seconds: number): void {
    this.#seconds[part] = (this.#seconds[part] ?? 0) + seconds;
  }

  addAll(others: Readonly<Record<string, number>>): void {
    for (const [part, seconds] of Object.entries(others)) this.add(part, seconds);
  }

  /** What was counted so far; the count starts anew. */
  take(): Record<string, number> {
    const seconds = this.#seconds;
    this.#seconds = {};
    return seconds;
  }
}
