/** Figures and names as a report writes them. */

/** As it is, with a decimal point; an en dash where nothing was measured. */
export function figure(value: number | null | undefined, unit = ''): string {
  if (value === null || value === undefined) return '–';
  const text = value !== 0 && Math.abs(value) < 1e-3 ? value.toExponential() : String(value);
  return unit === '' ? text : `${text} ${unit}`;
}

export function hertz(value: number): string {
  return `${Number(value.toFixed(2))} Hz`;
}

export function seconds(value: number): string {
  return `${Number(value.toFixed(2))} s`;
}

export const defectNames: Readonly<Record<string, string>> = {
  outer: 'outer race',
  inner: 'inner race',
  'rolling-element': 'rolling element',
  cage: 'cage',
  'cage-rate': 'cage rate',
};

/** `bearing-outer` as `bearing, outer race`. */
export function faultName(fault: string): string {
  const part = /^bearing-(.+)$/.exec(fault)?.[1];
  return part === undefined ? fault.replaceAll('-', ' ') : `bearing, ${defectNames[part] ?? part}`;
}

/** `2026-03-02T10:15:30.000Z` as `2026-03-02 10:15:30.000 UTC`; anything else as it is. */
export function time(label: string): string {
  const found = /^(\d{4}-\d\d-\d\d)T(\d\d:\d\d:\d\d(?:\.\d+)?)Z$/.exec(label);
  return found === null ? label : `${found[1]} ${found[2]} UTC`;
}
