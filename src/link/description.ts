import type { ColumnChannel } from '../config/station.ts';
import type { DescribeFrame, SampleUnit } from './frames.ts';
import { countRangeOf } from './unpack.ts';

/** One channel of a node, as the counts of it are to be read. */
export interface ChannelDescription {
  readonly name: string;
  readonly unit: SampleUnit;
  readonly unitsPerCount: number;
  /** Counts at which the converter is at its limit; null: unknown, or a logic channel, which has none. */
  readonly countRange: readonly [number, number] | null;
}

/** What a node says of itself, or what the settings say of one that sends columns. */
export interface NodeDescription {
  /** null: a node that sends columns has no number. */
  readonly node: number | null;
  readonly serialNumber: string | null;
  readonly firmware: string | null;
  readonly nominalRateHz: number;
  readonly channels: readonly ChannelDescription[];
}

export function describeFrames(frame: DescribeFrame): NodeDescription {
  const countRange = countRangeOf(frame.format);
  return {
    node: frame.node,
    serialNumber: frame.serialNumber,
    firmware: frame.firmware,
    nominalRateHz: frame.rateHz,
    channels: frame.channels.map((channel) => ({
      ...channel,
      countRange: channel.unit === 'logic' ? null : countRange,
    })),
  };
}

export function describeColumns(sampleRateHz: number, channels: readonly ColumnChannel[]): NodeDescription {
  return {
    node: null,
    serialNumber: null,
    firmware: null,
    nominalRateHz: sampleRateHz,
    channels: channels.map(({ name, unit, scale, decimals, range }) => ({
      name,
      unit,
      unitsPerCount: scale / 10 ** decimals,
      countRange:
        range && unit !== 'logic'
          ? [Math.round(range[0] * 10 ** decimals), Math.round(range[1] * 10 ** decimals)]
          : null,
    })),
  };
}
