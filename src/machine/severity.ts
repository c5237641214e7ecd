/** Severity zones of published tables. */
export type Zone = 'A' | 'B' | 'C' | 'D';
