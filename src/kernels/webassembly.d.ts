/** The few names of the WebAssembly JavaScript interface that the kernels use; the ES library has none of them. */
declare namespace WebAssembly {
  interface MemoryDescriptor {
    readonly initial: number;
    readonly maximum?: number;
    readonly shared?: boolean;
  }
  /** Sizes in pages of 65536 bytes. */
  class Memory {
    constructor(descriptor: MemoryDescriptor);
    readonly buffer: ArrayBuffer | SharedArrayBuffer;
    grow(pages: number): number;
  }
  class Module {
    constructor(bytes: Uint8Array);
    private readonly compiled: true; // keeps other objects from passing for one
  }
  class Instance {
    constructor(module: Module, imports: Record<string, Record<string, unknown>>);
    readonly exports: Readonly<Record<string, unknown>>;
  }
}
