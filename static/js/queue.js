/**
 * A queue of length one: at most one job runs, and of those that wait only the newest is kept.
 * Knows no DOM.
 *
 * @template Job, Answer
 */
export class LatestQueue {
  /**
   * @param {(job: Job, signal: AbortSignal) => Promise<Answer>} run
   * @param {(job: Job, answer: Answer) => void} onAnswer
   * @param {(job: Job, error: unknown) => void} onError
   */
  constructor(run, onAnswer, onError) {
    this.run = run;
    this.onAnswer = onAnswer;
    this.onError = onError;
    /** @type {Job | null} */
    this.waiting = null;
    /** @type {AbortController | null} */
    this.running = null;
  }

  /** Whether a job runs or waits. */
  get busy() {
    return this.running !== null || this.waiting !== null;
  }

  /**
   * Put a job in; one that still waits is forgotten.
   *
   * @param {Job} job
   * @param {boolean} [interrupt] also stop the one that runs: its answer is never delivered
   */
  push(job, interrupt = false) {
    this.waiting = job;
    if (interrupt) this.running?.abort();
    void this.pump();
  }

  /** Forget what waits and stop what runs. */
  stop() {
    this.waiting = null;
    this.running?.abort();
  }

  async pump() {
    if (this.running || this.waiting === null) return;
    const job = this.waiting;
    const control = new AbortController();
    this.waiting = null;
    this.running = control;
    try {
      const answer = await this.run(job, control.signal);
      this.running = null;
      if (!control.signal.aborted) this.onAnswer(job, answer);
    } catch (error) {
      this.running = null;
      if (!control.signal.aborted) this.onError(job, error);
    }
    void this.pump();
  }
}
