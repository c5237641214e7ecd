// The whole way: the store in its worker, the uplink over a link that fails, a broker that is killed, an agent that is too.
import { afterAll, expect, it } from 'vitest';
import { type WorkerStore as Made, WorkerStore } from '../../src/store/worker-store.ts';
import { ControlRoom, Rig, remoteBroker, until } from '../support/broker-rig.ts';
import { haveMosquitto, Mosquitto } from '../support/mosquitto.ts';
import { FaultyLink, sleep } from '../support/proxy.ts';
import { seeded } from '../support/seeded.ts';
import { makeFolder, removeFolders, roomyLimits, storeWorkerUrl } from '../support/store.ts';

afterAll(removeFolders);

it.runIf(haveMosquitto)(
  'an alarm that was committed arrives, in order, whatever is killed',
  { timeout: 60_000 },
  async () => {
    const random = seeded(20260302);
    const directory = makeFolder();
    const broker = await Mosquitto.start();
    const link = await FaultyLink.start(broker.port);
    const room = await ControlRoom.join(broker.port);
    const committed: string[] = [];
    let rig: Rig | null = null;
    let store: Made | null = null;
    let k = 0;
    for (let life = 0; life < 6; life++) {
      store = new WorkerStore({ directory, maxMb: 64, limits: roomyLimits, workerUrl: storeWorkerUrl });
      rig = await Rig.make(remoteBroker(link.port, { protocol: life % 2 === 0 ? 5 : 4 }), { store });
      await rig.uplink.start();
      for (let i = 0; i < 40; i++) {
        committed.push(await rig.alarm(k++, 4));
        if (random() < 0.3) await rig.send('reading', rig.uplink.topics.reading('pump-1/p0'));
        const fate = random();
        if (fate < 0.06) link.cut();
        else if (fate < 0.09) {
          await broker.kill();
          await broker.restart();
        } else if (fate < 0.5) await sleep(random() * 12);
      }
      // Killed without a goodbye, in the middle of whatever it was doing, but for the last time.
      if (life === 5) break;
      await store.terminate();
      link.cut();
      await rig.uplink.stop(50);
    }
    await room.hears(committed.slice(-4), 20_000);
    await rig!.empty(20_000);
    const received = room.ids().filter((id) => committed.includes(id));
    for (let subject = 0; subject < 4; subject++) {
      const topic = rig!.uplink.topics.alarm('pump-1', `p${subject}`, 'zone');
      const numbers = room.ids(topic).map((id) => Number(id.split('-')[1]));
      expect(numbers).toEqual(numbers.toSorted((a, b) => a - b));
    }
    // A broker that is killed takes what it acknowledged and had not handed on; what it was given last is retained and
    // sent again. So the last word on each topic is certain, and nearly all of the rest.
    for (const id of committed.slice(-4)) expect(received).toContain(id);
    expect(received.length).toBeGreaterThan(committed.length * 0.9);
    expect(new Set(committed).size).toBe(240);
    await rig!.uplink.stop(1000);
    await until(() => room.last('forebay/north-weir/agent')?.state === 'offline', 'the goodbye');
    await store!.close();
    await room.leave();
    await link.stop();
    await broker.stop();
  },
);
