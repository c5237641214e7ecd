import type { Expectation } from '../config/station.ts';
import type { NodeDescription } from './description.ts';

/**
 * Why a node is not the one that the station expects, in words; null: it may be. Rates are compared to the
 * millihertz that the link carries; the channels expected must be there, in any order, among others.
 */
export function whyForeign(node: NodeDescription, expected: Expectation): string | null {
  if (expected.node !== null && node.node !== expected.node) {
    return `node ${node.node} speaks, node ${expected.node} is expected`;
  }
  if (expected.serialNumber !== null && node.serialNumber !== expected.serialNumber) {
    return `serial number ${JSON.stringify(node.serialNumber)}, ${JSON.stringify(expected.serialNumber)} is expected`;
  }
  if (expected.sampleRateHz !== null && Math.abs(node.nominalRateHz - expected.sampleRateHz) > 0.000_75) {
    return `it samples at ${node.nominalRateHz} Hz, ${expected.sampleRateHz} Hz is expected`;
  }
  const missing = expected.channels?.filter(
    (name) => !node.channels.some((channel) => channel.name === name),
  );
  if (missing && missing.length > 0) {
    return `no channel ${missing.join(', ')} among ${node.channels.map((channel) => channel.name).join(', ')}`;
  }
  return null;
}
