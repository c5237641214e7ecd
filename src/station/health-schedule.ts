/**
 * When `health` is sent: at first, every six hours, and soon after something in it went wrong or right again. What
 * keeps going wrong is told in ever the same words, so those come a minute apart at least and a dozen in six hours.
 */

const FIRST_S = 30;
const EVERY_S = 6 * 3600;
/** What follows from a trouble shows within this. */
const SETTLE_S = 5;
const APART_S = 60;
/** Counters of errors that merely grow are told no more often than this. */
const GROWTH_APART_S = 600;
const UNPLANNED = 12;

export class HealthSchedule {
  #dueS: number;
  #sentS: number;
  #periodS: number;
  #left = UNPLANNED;
  #countAtSent = 0;

  constructor(nowS: number) {
    this.#dueS = nowS + FIRST_S;
    this.#sentS = Number.NEGATIVE_INFINITY;
    this.#periodS = nowS;
  }

  /** A condition changed: a link, the database, the disk, measuring. */
  changed(nowS: number): void {
    if (this.#left > 0) this.#dueS = Math.min(this.#dueS, Math.max(nowS + SETTLE_S, this.#sentS + APART_S));
  }

  /**
   * Asked once a second; true: send it now.
   * @param errors all counters of what goes wrong, added up.
   */
  isDue(nowS: number, errors: number): boolean {
    // A link that leaves with a configuration takes its counters along: what grows after that is news all the same.
    this.#countAtSent = Math.min(this.#countAtSent, errors);
    const grew = errors > this.#countAtSent && nowS - this.#sentS >= GROWTH_APART_S;
    if (grew && Number.isFinite(this.#sentS)) this.changed(nowS);
    if (nowS < this.#dueS) return false;
    if (nowS - this.#periodS >= EVERY_S) {
      this.#periodS = nowS;
      this.#left = UNPLANNED;
    } else this.#left--;
    this.#sentS = nowS;
    this.#countAtSent = errors;
    this.#dueS = nowS + EVERY_S;
    return true;
  }
}
