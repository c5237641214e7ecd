import type { AlarmPlan } from '../alarm/plan.ts';
import type { Station } from '../config/station.ts';
import type { Topics } from '../uplink/topics.ts';

/** Whether this configuration can write a retained topic; what it cannot is emptied at the start. */
export function ownTopics(station: Station, plan: AlarmPlan, topics: Topics): (topic: string) => boolean {
  const own = new Set([topics.agent, topics.health]);
  for (const alarm of plan.alarms.values()) own.add(topics.below(alarm.topic));
  for (const machine of station.machines) {
    own.add(topics.state(machine.id));
    own.add(topics.finding(machine.id));
    for (const point of machine.points) own.add(topics.reading(point.key));
  }
  return (topic) => own.has(topic);
}
