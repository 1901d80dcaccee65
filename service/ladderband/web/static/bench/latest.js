// The newest question only: waits for a pause in the questions, drops answers that came too late.

const SHORTEST_MS = 8;
const LONGEST_MS = 400;

export class Latest {
  #timer = 0;
  #controller = null;
  #took = 0;
  #number = 0;

  // The pause grows with the time an answer takes, so that a slow service is not flooded.
  later(work) {
    this.stop();
    const pause = Math.min(LONGEST_MS, Math.max(SHORTEST_MS, this.#took / 4));
    this.#timer = setTimeout(() => {
      this.#timer = 0;
      this.#run(work);
    }, pause);
  }

  // work(signal) asks and returns a function that shows the answer.
  async #run(work) {
    const number = ++this.#number;
    const controller = (this.#controller = new AbortController());
    const began = performance.now();
    let show;
    try {
      show = await work(controller.signal);
    } catch (error) {
      if (controller.signal.aborted) return;
      throw error;
    }
    if (number !== this.#number || controller.signal.aborted) return;
    this.#took = performance.now() - began;
    this.#controller = null;
    show();
  }

  get busy() {
    return this.#timer !== 0 || this.#controller !== null;
  }

  stop() {
    clearTimeout(this.#timer);
    this.#timer = 0;
    this.#controller?.abort();
    this.#controller = null;
  }
}
