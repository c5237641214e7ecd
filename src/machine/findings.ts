export interface Finding {
  fault: string;
  likelihood: 'possible' | 'likely';
  points: string[];
  evidence: string[];
  check: string;
}
