/**
 * Where things lie in a plan: indexes of 32-bit words. Read by the module and by the TypeScript that writes plans, so
 * this file uses no syntax that only one of them has.
 *
 * A plan is a head of PLAN_WORDS words, then (kind PASSES) one row of PASS_WORDS words a pass.
 * A, B: the plan's two scratch buffers, `length` points of POINT_BYTES each.
 */
export const POINT_BYTES = 32;

export const KIND_PASSES = 0;
export const KIND_CHIRP = 1;

export const PLAN_KIND = 0;
export const PLAN_LENGTH = 1;
export const PLAN_A = 2;
export const PLAN_B = 3;
/** KIND_PASSES: how many passes. */
export const PLAN_PASSES = 4;
/** KIND_CHIRP: the plan of the convolution's length; the chirp, `length` complex; the filter's transform, complex. */
export const PLAN_SUBPLAN = 4;
export const PLAN_CHIRP = 5;
export const PLAN_FILTER = 6;
/** Bytes between four buffers A for four times four lines; 0 when there is one only. */
export const PLAN_GAP = 7;
export const PLAN_WORDS = 8;

/** How a pass works: 2, 3, 4, 5 and 7 have kernels of their own, any other odd radix one of these two. */
export const METHOD_DIRECT = 100;
export const METHOD_RADER = 101;

export const PASS_METHOD = 0;
export const PASS_RADIX = 1;
/** m: groups, that is the length still to be transformed after this pass. */
export const PASS_GROUPS = 2;
/** s: run, that is the product of the radices before this pass. */
export const PASS_RUN = 3;
/** (m - 1) rows of (radix - 1) complex: w^(pk), p = 1.., k = 1.., w = exp(-2 pi i / (m radix)). */
export const PASS_TWIDDLES = 4;
/** METHOD_DIRECT: cosines and sines. METHOD_RADER: the filter's transform, complex. */
export const PASS_TABLE = 5;
/** METHOD_DIRECT: work space of `radix` points. METHOD_RADER: plan of length radix - 1. */
export const PASS_WORK = 6;
/** METHOD_RADER: radix - 1 words, the powers 0, 1, 2 .. of a primitive root modulo the radix. */
export const PASS_ORDER = 7;
export const PASS_WORDS = 8;
