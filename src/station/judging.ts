/**
 * From readings to alarm and finding effects: what the running agent and a replay share. Nothing here waits or stores;
 * the caller commits the effects of a step and then keeps its state.
 */

import type { AlarmEffect, AlarmInput, AllocateId } from '../alarm/effects.ts';
import { replanAlarms, stepAlarms } from '../alarm/engine.ts';
import { machineEvidence } from '../alarm/evidence.ts';
import type { AlarmPlan } from '../alarm/plan.ts';
import type { EngineState } from '../alarm/state.ts';
import type { Finding } from '../machine/finding-evidence.ts';
import { findingsFor } from '../machine/findings.ts';
import type { Reading } from '../measure/reading.ts';
import { runningReading } from '../measure/zone.ts';

/** A machine runs above its threshold, and stops below this share of it. Common practice, no source. */
const STOPS_BELOW = 0.8;

interface JudgedStep {
  effects: readonly AlarmEffect[];
  /** The state advances here, so that a step whose commit fails never happened. */
  keep(): void;
}

export class Judging {
  #plan: AlarmPlan;
  readonly #allocateId: AllocateId;
  #state: EngineState;
  /** Latest reading of each point. */
  readonly #latest = new Map<string, Reading>();
  /** What the last reading of each point said of running by itself. */
  readonly #ownRunning = new Map<string, boolean | null>();
  /** Points of a machine that have reported since its faults were last looked for. */
  readonly #rounds = new Map<string, Set<string>>();

  constructor(plan: AlarmPlan, state: EngineState, allocateId: AllocateId) {
    this.#plan = plan;
    this.#state = state;
    this.#allocateId = allocateId;
  }

  get plan(): AlarmPlan {
    return this.#plan;
  }

  get state(): EngineState {
    return this.#state;
  }

  /**
   * The reading of a point as its machine knows it. A smooth point, often an axial one, may vibrate less than the
   * threshold of `running`; where the shaft's speed shows in it and another point says that the machine runs, it does.
   * At rest no speed shows, so no reading of a machine that has stopped passes for one of a running machine.
   */
  settled(pointKey: string, reading: Reading): Reading {
    const entry = this.#plan.points.get(pointKey);
    if (!entry) return reading;
    const { machine, point } = entry;
    const ran = this.#ownRunning.get(pointKey) === true;
    this.#ownRunning.set(pointKey, reading.running);
    if (machine.running.kind !== 'velocity' || reading.running !== false) return reading;
    // Hysteresis, for a machine that hovers about the threshold is not started every few seconds.
    if (ran && (reading.velocity.overall ?? 0) > STOPS_BELOW * machine.running.aboveMmS) {
      this.#ownRunning.set(pointKey, true);
      return runningReading(reading, point, machine);
    }
    const others = machine.points.filter(({ key }) => key !== pointKey);
    const smooth = reading.shaft.hz !== null && others.some(({ key }) => this.#ownRunning.get(key) === true);
    return smooth ? runningReading(reading, point, machine) : reading;
  }

  /** What an input changes; nothing where it is about what has left the configuration. */
  step(input: AlarmInput): JudgedStep {
    if (!isAbout(this.#plan, input)) return { effects: [], keep: () => undefined };
    const { state, effects } = stepAlarms(this.#plan, this.#state, input, this.#allocateId);
    return {
      effects,
      keep: () => {
        this.#state = state;
      },
    };
  }

  /** Goes on with another plan: alarms that stay keep their state, those that left are withdrawn. */
  replan(plan: AlarmPlan, t: string): JudgedStep {
    const { state, effects } = replanAlarms(plan, this.#state, t, this.#allocateId);
    return {
      effects,
      keep: () => {
        this.#plan = plan;
        this.#state = state;
        this.#rounds.clear();
        for (const key of this.#latest.keys()) if (!plan.points.has(key)) this.#latest.delete(key);
      },
    };
  }

  /**
   * Takes note of a reading and gives the findings of its machine where a round of its points is complete: each has
   * reported, or one reports for the second time.
   */
  noteReading(
    pointKey: string,
    reading: Reading,
  ): { machineId: string; findings: readonly Finding[] } | null {
    const entry = this.#plan.points.get(pointKey);
    // It came with a configuration whose turn has not come yet.
    if (!entry) return null;
    const { machine } = entry;
    const round = this.#rounds.get(machine.id) ?? new Set<string>();
    this.#rounds.set(machine.id, round);
    let findings: readonly Finding[] | null = null;
    if (round.has(pointKey)) {
      findings = this.#evaluate(machine.id);
      round.clear();
    }
    this.#latest.set(pointKey, reading);
    round.add(pointKey);
    if (round.size === machine.points.length) {
      findings = this.#evaluate(machine.id);
      round.clear();
    }
    return findings && { machineId: machine.id, findings };
  }

  #evaluate(machineId: string): readonly Finding[] {
    return findingsFor(machineEvidence(this.#plan, machineId, this.#latest, this.#state));
  }
}

function isAbout(plan: AlarmPlan, input: AlarmInput): boolean {
  switch (input.kind) {
    case 'reading':
      return plan.points.has(input.pointKey);
    case 'findings':
      return plan.machines.has(input.machineId);
    case 'trend':
      return plan.alarms.has(input.alarm);
    case 'link':
      return plan.alarms.has(`agent/${input.link}.silent`);
    default:
      return true;
  }
}
