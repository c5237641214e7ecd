/** Kinematics of a rolling-element bearing with a fixed outer ring. */

/** What is known of a bearing; a bearing of the configuration has this shape. */
export interface BearingKnowledge {
  readonly elements: number | null;
  readonly geometry: {
    readonly elementMm: number;
    readonly pitchMm: number;
    readonly contactDeg: number;
  } | null;
  readonly multiples: BearingRates | null;
}

/** Per revolution of the shaft: cage, spin of a rolling element (once per spin), outer and inner race passes. */
export interface BearingRates {
  readonly ftf: number;
  readonly bsf: number;
  readonly bpfo: number;
  readonly bpfi: number;
}

export interface BearingMultiples extends BearingRates {
  /** false: rules of thumb, so every figure that rests on them is uncertain. */
  readonly certain: boolean;
}

/**
 * The ratio d·cos(φ)/D that the rules of thumb 0.4·n, 0.6·n and 0.4 stand for (common practice, no source);
 * the spin rate of an element follows from the same ratio.
 */
const RULE_OF_THUMB_RATIO = 0.2;

/** @param pitchOverElement D/d; @param ratio (d/D)·cos φ. */
function ratesOf(elements: number, pitchOverElement: number, ratio: number): BearingRates {
  return {
    ftf: (1 - ratio) / 2,
    bsf: (pitchOverElement / 2) * (1 - ratio * ratio),
    bpfo: (elements * (1 - ratio)) / 2,
    bpfi: (elements * (1 + ratio)) / 2,
  };
}

function requireElements(elements: number): void {
  if (!Number.isInteger(elements) || elements < 3) {
    throw new RangeError(`a bearing has a whole number of rolling elements, at least 3, not ${elements}`);
  }
}

/**
 * The four defect rates of a bearing as multiples of its shaft's speed.
 *
 * @param bearing published multiples (used as they are), or element diameter and pitch diameter in mm with the
 *   contact angle in degrees and the number of elements, or the number of elements alone.
 * @returns the multiples, `certain` unless they are rules of thumb; null when nothing is known.
 * @throws RangeError for a geometry that cannot be built: an element that is not smaller than the pitch circle,
 *   elements that overlap, a contact angle outside 0 to below 90 degrees.
 *
 * Valid for a fixed outer ring and rolling without slip; 1 to 2 % of slip is normal in service (Smith and Randall
 * 2015, MSSP 64-65, p. 102). Source of the formulas: the same paper; r = (d/D)·cos φ, FTF = (1−r)/2,
 * BPFO = n·(1−r)/2, BPFI = n·(1+r)/2, BSF = (D/2d)·(1−r²).
 *
 * Worked: 9 elements of 0.3126 in on a pitch circle of 1.537 in, 0°: BPFO 3.5848, BPFI 5.4152, FTF 0.3983,
 * BSF 2.3567.
 */
export function bearingMultiples(bearing: BearingKnowledge): BearingMultiples | null {
  if (bearing.multiples !== null) {
    const { ftf, bsf, bpfo, bpfi } = bearing.multiples;
    return { ftf, bsf, bpfo, bpfi, certain: true };
  }
  if (bearing.elements === null) return null;
  requireElements(bearing.elements);
  if (bearing.geometry === null)
    return { ...ratesOf(bearing.elements, 1 / RULE_OF_THUMB_RATIO, RULE_OF_THUMB_RATIO), certain: false };

  const { elementMm, pitchMm, contactDeg } = bearing.geometry;
  if (!(contactDeg >= 0 && contactDeg < 90)) {
    throw new RangeError(`a contact angle lies from 0 to below 90 degrees, not ${contactDeg}`);
  }
  // Neighbouring elements touch when the chord between their centres is one diameter.
  if (!(elementMm > 0 && elementMm <= pitchMm * Math.sin(Math.PI / bearing.elements))) {
    throw new RangeError(
      `${bearing.elements} elements of ${elementMm} mm do not fit on a pitch circle of ${pitchMm} mm`,
    );
  }
  const ratio = (elementMm / pitchMm) * Math.cos((contactDeg * Math.PI) / 180);
  return { ...ratesOf(bearing.elements, pitchMm / elementMm, ratio), certain: true };
}
