// Requests that follow a moving hand: one on its way, at most one waiting, and that one the newest.

/**
 * Runs `work(wanted)` for the newest wish alone.
 *
 * A request on its way is not broken off: a small picture is on the screen sooner than a worker that was
 * stopped is ready again.
 */
export class Latest {
  constructor(work, arrived, failed) {
    this.work = work;
    this.arrived = arrived;
    this.failed = failed;
    this.busy = false;
    this.waiting = null;
    this.turn = 0;
  }

  wish(wanted) {
    this.waiting = { wanted, turn: this.turn };
    if (!this.busy) this.#next();
  }

  /** Forget what is waiting, and what is on its way. */
  drop() {
    this.waiting = null;
    this.turn += 1;
  }

  async #next() {
    while (this.waiting) {
      const { wanted, turn } = this.waiting;
      this.waiting = null;
      this.busy = true;
      try {
        const found = await this.work(wanted);
        if (turn === this.turn) this.arrived(wanted, found, this.waiting !== null);
      } catch (fault) {
        if (turn === this.turn && !this.waiting) this.failed(fault);
      } finally {
        this.busy = false;
      }
    }
  }
}
