/** What the page hands to its script, and what the parts of the script hand to each other. */

import type Uplot from 'uplot';

export interface MarkData {
  hz: number;
  name: string;
  family: string;
  kind: 'main' | 'harmonic' | 'sideband';
  bearing?: string;
  found?: boolean;
}

export interface SpectrumData {
  stepHz: number;
  /** 1/T. */
  lineHz: number;
  window: 'rectangular' | 'hann' | 'flat-top';
  /** Base64 of little-endian 32-bit floats. */
  values: string;
  marks: MarkData[];
}

export interface SamplesData {
  block: number;
  bytesPerValue: 2 | 3 | 4;
  base64: string;
}

export interface CascadeData {
  stepHz: number;
  firstHz: number;
  bins: number;
  timesS: number[];
  values: string;
}

export interface PointData {
  key: string;
  shaftHz: number | null;
  scale: { meanCounts: number; gPerCount: number };
  samples: SamplesData;
  recordS: [number, number];
  velocity: SpectrumData | null;
  acceleration: SpectrumData | null;
  envelope: SpectrumData | null;
  defect: string | null;
  cascade: CascadeData | null;
}

export interface ReportData {
  rateHz: number;
  frames: number;
  points: PointData[];
}

/** Lowest and highest count of each `size` samples. */
export interface Level {
  size: number;
  low: Int32Array;
  high: Int32Array;
}

export interface Extremes {
  low: number;
  high: number;
}

/** What a chart needs of the thing that it shows. */
export interface ChartHost {
  figure: HTMLElement;
  plot: HTMLElement;
  tools: HTMLElement;
  readout: HTMLElement;
}

export interface ZoomSettings {
  /** Whole range, and the narrowest that makes sense. */
  whole: [number, number];
  least: number;
  /** What zooming in closes in on; null: the middle. */
  centre(): number | null;
}

declare global {
  const uPlot: typeof import('uplot');
}

export type Plot = Uplot;
