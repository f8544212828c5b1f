import { parentPort } from "node:worker_threads";
import { createSimdKernels } from "../kernels/simd-kernels.js";
import { type JobAnswer, READY, type ToWorker } from "./crew.js";
import { JobRunner } from "./jobs.js";
import { planRecipe } from "./plan.js";
import { Timings } from "./timings.js";

/** A worker thread: gets its setup once, then jobs; it works on the shared memory and answers with what is not in it. */
const port = parentPort!;
let runner: JobRunner | undefined;

port.on("message", (message: ToWorker) => {
  if ("setup" in message) {
    const { place, facts, recipes } = message.setup;
    runner = new JobRunner(
      recipes.map((recipe) => planRecipe(facts, recipe)),
      facts,
      createSimdKernels(place),
      place.memory,
      new Timings(),
    );
    port.postMessage(READY);
    return;
  }
  const { id, job } = message;
  try {
    port.postMessage({ id, reply: runner!.run(job) } satisfies JobAnswer);
  } catch (error) {
    port.postMessage({ id, error } satisfies JobAnswer);
  }
});
