/** Severity zones of published tables, and where they apply. */

/** Severity zones of published tables. */
export type Zone = (typeof ZONES)[number];

const ZONES = ['A', 'B', 'C', 'D'] as const;

/** Which table judges a machine; a severity of the configuration has this shape. */
export type SeverityChoice =
  | { readonly table: 'iso-10816-7'; readonly category: 'I' | 'II'; readonly ratedKw: number }
  | {
      readonly table: 'iso-20816-3' | 'iso-10816-3';
      readonly group: 1 | 2;
      readonly support: 'rigid' | 'flexible';
    }
  | { readonly table: 'limits'; readonly limitsMmS: Boundaries };

/** A/B, B/C, C/D. */
export type Boundaries = readonly [number, number, number];

export interface SeverityLimits {
  /** Whose limits they are, for a person. */
  readonly name: string;
  readonly velocityMmS: Boundaries;
  /** RMS; null: the table has none. */
  readonly displacementUm: Boundaries | null;
  /** The highest alarm and trip limits that the table allows, mm/s RMS. */
  readonly alarmMaxMmS: number;
  readonly tripMaxMmS: number;
}

/** ISO 10816-3:2009 Tables A.1 and A.2; the velocities of ISO 20816-3:2022 are the same. */
const PART_3: Record<1 | 2, Record<'rigid' | 'flexible', { mmS: Boundaries; um: Boundaries }>> = {
  1: {
    rigid: { mmS: [2.3, 4.5, 7.1], um: [29, 57, 90] },
    flexible: { mmS: [3.5, 7.1, 11.0], um: [45, 90, 140] },
  },
  2: {
    rigid: { mmS: [1.4, 2.8, 4.5], um: [22, 45, 71] },
    flexible: { mmS: [2.3, 4.5, 7.1], um: [37, 71, 113] },
  },
};

/** ISO 10816-7:2009 Table A.1, zones and the highest alarm and trip limits. */
const PART_7: Record<
  'I' | 'II',
  Record<'small' | 'large', { mmS: Boundaries; alarmMax: number; tripMax: number }>
> = {
  I: {
    small: { mmS: [2.5, 4.0, 6.6], alarmMax: 5.0, tripMax: 8.3 },
    large: { mmS: [3.5, 5.0, 7.6], alarmMax: 6.3, tripMax: 9.5 },
  },
  II: {
    small: { mmS: [3.2, 5.1, 8.5], alarmMax: 6.4, tripMax: 10.6 },
    large: { mmS: [4.2, 6.1, 9.5], alarmMax: 7.6, tripMax: 11.9 },
  },
};

/** Exactly 200 kW is in the lower column of ISO 10816-7 Table A.1. */
const PART_7_SMALL_KW = 200;

/** Scopes, r/min. From memory of the scope clauses: part 3 from 120 r/min, part 7's velocities from 600 r/min. */
const SPEED_RPM = {
  'iso-10816-7': [600, Number.POSITIVE_INFINITY],
  'iso-10816-3': [120, 15_000],
  'iso-20816-3': [120, 30_000],
} as const;

/**
 * The limits that judge a machine.
 *
 * @param choice the table and what it asks for: power in kW, category, group, support, or limits in mm/s RMS.
 * @returns zone boundaries (velocity in mm/s RMS, displacement in µm RMS where the table has it) and the highest
 *   alarm and trip limits: those printed in ISO 10816-7, else 1.25 × B/C and 1.25 × C/D (ISO 10816-3 5.4.1, 5.4.2).
 *
 * Valid for broad-band readings on non-rotating parts; see {@link severityApplies}. Never throws.
 * Sources: ISO 10816-3:2009 Tables A.1, A.2; ISO 10816-7:2009 Table A.1.
 *
 * Worked: category I at 45 kW: 2.5, 4.0, 6.6 mm/s, alarm at most 5.0, trip at most 8.3 mm/s.
 */
export function severityLimits(choice: SeverityChoice): SeverityLimits {
  switch (choice.table) {
    case 'iso-10816-7': {
      const small = choice.ratedKw <= PART_7_SMALL_KW;
      const row = PART_7[choice.category][small ? 'small' : 'large'];
      return {
        name: `ISO 10816-7 category ${choice.category} ${small ? 'up to' : 'above'} ${PART_7_SMALL_KW} kW`,
        velocityMmS: row.mmS,
        displacementUm: null,
        alarmMaxMmS: row.alarmMax,
        tripMaxMmS: row.tripMax,
      };
    }
    case 'iso-10816-3':
    case 'iso-20816-3': {
      const row = PART_3[choice.group][choice.support];
      const standard = choice.table === 'iso-10816-3' ? 'ISO 10816-3' : 'ISO 20816-3';
      return {
        name: `${standard} group ${choice.group}, ${choice.support} support`,
        velocityMmS: row.mmS,
        displacementUm: row.um,
        alarmMaxMmS: 1.25 * row.mmS[1],
        tripMaxMmS: 1.25 * row.mmS[2],
      };
    }
    case 'limits':
      return {
        name: 'the limits of the configuration',
        velocityMmS: choice.limitsMmS,
        displacementUm: null,
        alarmMaxMmS: 1.25 * choice.limitsMmS[1],
        tripMaxMmS: 1.25 * choice.limitsMmS[2],
      };
  }
}

/**
 * The zone of a value between boundaries; a value on a boundary belongs to the lower zone.
 *
 * @param value in the unit of the boundaries, RMS, not negative.
 * @param boundaries A/B, B/C, C/D.
 * @throws RangeError for a value that is negative or not a number.
 *
 * Worked: 2.8 mm/s between 1.4, 2.8, 4.5 mm/s is B; 2.9 is C.
 */
export function zoneOf(value: number, boundaries: Boundaries): Zone {
  return ZONES[rankOf(value, boundaries)]!;
}

function rankOf(value: number, boundaries: Boundaries): number {
  if (!(value >= 0)) throw new RangeError(`an RMS value is a number from 0 up, not ${value}`);
  return boundaries.filter((boundary) => value > boundary).length;
}

/**
 * The zone of a reading: the more severe of velocity and displacement where the table has both, at every speed
 * (ISO 10816-3 5.2.3; its two tables cross near 10 to 12.6 Hz).
 *
 * @param velocityMmS RMS in the table's band.
 * @param displacementUm RMS in the same band.
 * @throws RangeError as {@link zoneOf}.
 *
 * Worked: group 2, rigid support: 1.3 mm/s is A, but with 25 µm it is B.
 */
export function severityZone(velocityMmS: number, displacementUm: number, limits: SeverityLimits): Zone {
  const byVelocity = rankOf(velocityMmS, limits.velocityMmS);
  const byDisplacement = limits.displacementUm === null ? 0 : rankOf(displacementUm, limits.displacementUm);
  return ZONES[Math.max(byVelocity, byDisplacement)]!;
}

/**
 * The alarm limit that follows from a machine's own baseline: baseline + 0.25 × B/C, at most the highest alarm
 * limit of the table (ISO 10816-3 5.4.1).
 *
 * @param baselineMmS velocity of the healthy machine, mm/s RMS.
 * @returns mm/s RMS.
 * @throws RangeError for a baseline that is negative or not a number.
 *
 * Worked: group 2, rigid support: 0.9 mm/s gives 1.6 mm/s; 2.9 mm/s gives 3.5 mm/s, the cap.
 */
export function alarmLimitFromBaseline(baselineMmS: number, limits: SeverityLimits): number {
  if (!(baselineMmS >= 0)) throw new RangeError(`a baseline is a number from 0 up, not ${baselineMmS}`);
  return Math.min(baselineMmS + 0.25 * limits.velocityMmS[1], limits.alarmMaxMmS);
}

/** Where a reading was taken, as far as the tables care. */
export interface SeverityPlace {
  readonly severity: SeverityChoice | null;
  readonly direction: string;
  readonly at: 'bearing' | 'foot' | 'frame' | 'pipe';
  readonly thrust: boolean;
}

/**
 * Whether the zones of a place hold there, and if not, why.
 *
 * @param place where the reading is taken and which table is to judge it.
 * @param shaftHz speed of the shaft at the place; null: unknown, then no scope of speed is held against it.
 * @returns null where the table applies, else the reason in words.
 *
 * Sources: zones hold for bearing housings, and axially only at the thrust bearing (ISO 10816-3 4.1, 5.2; from
 * memory). Powers: ISO 10816-7 above 1 kW (its scope; from memory). Speeds: ISO 10816-3 120 to 15 000 r/min,
 * ISO 20816-3 120 to 30 000 r/min, ISO 10816-7 velocities from 600 r/min (scopes; from memory).
 *
 * Worked: a horizontal reading at a bearing, part 3, 1.9 Hz (114 r/min): 'ISO 20816-3 holds from 120 r/min, …'.
 */
export function severityApplies(place: SeverityPlace, shaftHz: number | null): string | null {
  const choice = place.severity;
  if (choice === null) return 'no severity table is configured';
  if (place.at !== 'bearing') return `zones hold on bearing housings, this point is on the ${place.at}`;
  if (place.direction === 'axial' && !place.thrust) return 'axial zones hold only at the thrust bearing';
  if (choice.table === 'limits') return null;
  const name = choice.table.toUpperCase().replace('-', ' ');
  if (choice.table === 'iso-10816-7' && !(choice.ratedKw > 1)) {
    return `${name} holds above 1 kW, this machine has ${choice.ratedKw} kW`;
  }
  if (shaftHz === null) return null;
  const [low, high] = SPEED_RPM[choice.table];
  const rpm = shaftHz * 60;
  if (rpm < low) return `${name} holds from ${low} r/min, the shaft turns at ${rpm.toFixed(0)} r/min`;
  if (rpm > high) return `${name} holds up to ${high} r/min, the shaft turns at ${rpm.toFixed(0)} r/min`;
  return null;
}
