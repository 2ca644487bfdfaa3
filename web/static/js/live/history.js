/** What a run has told so far, in order.  Progress may be told twice after a reconnect, so repeats are dropped. */

const MOST_ITERATIONS = 2000;

export class History {
  constructor() {
    this.iterations = [];
    this.meshes = [];
  }

  /** The latest iteration or mesh, or null. */
  get last() {
    return this.iterations.at(-1) ?? null;
  }

  /** Keep an event of kind "iteration" or "mesh"; others leave no trace. */
  take(event) {
    if (event.kind === "iteration" && later(event, this.last)) {
      this.iterations.push(event);
      if (this.iterations.length > MOST_ITERATIONS) this.iterations.splice(0, this.iterations.length - MOST_ITERATIONS);
    }
    if (event.kind === "mesh" && event.mesh > (this.meshes.at(-1)?.mesh ?? 0)) this.meshes.push(event);
  }
}

function later(event, last) {
  return !last || event.mesh > last.mesh || (event.mesh === last.mesh && event.iteration > last.iteration);
}
