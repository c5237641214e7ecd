import { describe, expect, it } from 'vitest';
import { Supervisor } from '../../src/link/supervisor.ts';
import { OpenError, type Transport, type TransportHandlers } from '../../src/link/transport.ts';
import { FakeClock } from './fake-clock.ts';

type Opening = 'works' | 'fails' | 'hangs';

/** A supervisor over transports that do as they are told. */
function supervised() {
  const clock = new FakeClock();
  const line = { opening: 'works' as Opening, closing: 'works' as Opening };
  const transports: { handlers: TransportHandlers | null; open: boolean }[] = [];
  const states: string[] = [];
  let bytes = 0;
  let opened = 0;
  const make = (): Transport => {
    const transport = { handlers: null as TransportHandlers | null, open: false };
    transports.push(transport);
    return {
      open: async (handlers) => {
        if (line.opening === 'hangs') await new Promise(() => undefined);
        if (line.opening === 'fails') throw new OpenError('missing', 'not there', 'Plug it in.');
        transport.handlers = handlers;
        transport.open = true;
      },
      close: async () => {
        if (line.closing === 'hangs') await new Promise(() => undefined);
        transport.open = false;
      },
    };
  };
  const supervisor = new Supervisor(make, clock, {
    onBytes: (chunk) => {
      bytes += chunk.length;
    },
    onOpened: () => opened++,
    onState: (state) => states.push(state.kind),
  });
  return {
    clock,
    line,
    transports,
    states,
    supervisor,
    send: () => transports.at(-1)?.handlers?.onBytes(Uint8Array.of(1)),
    unplug: () => transports.at(-1)?.handlers?.onClosed('gone'),
    bytes: () => bytes,
    opened: () => opened,
  };
}

describe('the supervisor of a line', () => {
  it('opens, and leaves a line that speaks alone', async () => {
    const { clock, supervisor, send, states, transports } = supervised();
    supervisor.start();
    for (let k = 0; k < 100; k++) {
      await clock.pass(1000);
      send();
    }
    expect(states).toEqual(['opening', 'open']);
    expect(transports).toHaveLength(1);
  });

  it('tells silence, and opens anew until bytes come', async () => {
    const { clock, supervisor, send, states, transports } = supervised();
    supervisor.start();
    await clock.pass(1000);
    send();
    await clock.pass(2900);
    expect(states.at(-1)).toBe('open');
    await clock.pass(1000);
    expect(states).toEqual(['opening', 'open', 'silent']);
    await clock.pass(60_000);
    expect(states.at(-1)).toBe('silent');
    expect(supervisor.counts.silent).toBe(1);
    // Open most of the time: a period is three seconds open, a quarter closed, and what the watch is late.
    expect(transports.length).toBeGreaterThan(15);
    expect(transports.filter(({ open }) => open).length).toBeLessThanOrEqual(1);
    send();
    expect(states.at(-1)).toBe('open');
  });

  it('tells an unplugged device, and tries less and less often but at least every five seconds', async () => {
    const { clock, supervisor, line, send, unplug, states, transports } = supervised();
    supervisor.start();
    await clock.pass(10);
    send();
    line.opening = 'fails';
    unplug();
    expect(states.at(-1)).toBe('unplugged');
    const waits: number[] = [];
    for (let k = 0; k < 8; k++) {
      const wait = clock.nextInMs;
      waits.push(wait);
      await clock.pass(wait);
    }
    expect(waits).toEqual([250, 500, 1000, 2000, 4000, 4000, 4000, 4000]);
    expect(states.at(-1)).toBe('refused');
    expect(transports).toHaveLength(9);
    clock.chance = 0.999;
    await clock.pass(4000);
    expect(clock.nextInMs).toBeLessThanOrEqual(5000);
    line.opening = 'works';
    await clock.pass(5000);
    expect(states.at(-1)).toBe('open');
    expect(supervisor.counts).toMatchObject({ unplugged: 1, opened: 2 });
  });

  it('spreads its tries by chance', async () => {
    const first = async (chance: number) => {
      const { clock, supervisor, line } = supervised();
      line.opening = 'fails';
      clock.chance = chance;
      supervisor.start();
      await clock.pass(0);
      return clock.nextInMs;
    };
    expect(await first(0)).toBe(187.5);
    expect(await first(1)).toBe(312.5);
  });

  it('does not hurry after a line that opens and at once goes away', async () => {
    const { clock, supervisor, unplug, transports } = supervised();
    supervisor.start();
    await clock.pass(0);
    for (let k = 0; k < 600; k++) {
      unplug();
      await clock.pass(100);
    }
    expect(transports.length).toBeLessThan(25);
  });

  it('gives up on an open that hangs, and on a close that hangs', async () => {
    const { clock, supervisor, line, states, send } = supervised();
    line.opening = 'hangs';
    line.closing = 'hangs';
    supervisor.start();
    await clock.pass(4900);
    expect(states).toEqual(['opening']);
    await clock.pass(200);
    expect(states.at(-1)).toBe('refused');
    line.opening = 'works';
    await clock.pass(3000);
    send();
    expect(states.at(-1)).toBe('open');
  });

  it('hears nothing of a transport that it has let go', async () => {
    const { clock, supervisor, transports, bytes, states } = supervised();
    supervisor.start();
    await clock.pass(5000);
    expect(transports.length).toBe(2);
    transports[0]!.handlers!.onBytes(Uint8Array.of(1));
    transports[0]!.handlers!.onClosed('late');
    expect(bytes()).toBe(0);
    expect(states).toEqual(['opening', 'open', 'silent']);
  });

  it('does not call a line silent that it had no time to read', async () => {
    const { clock, supervisor, send, states } = supervised();
    supervisor.start();
    await clock.pass(100);
    send();
    // The thread stalls for eight seconds; the timer then comes before the bytes.
    clock.ms += 8000;
    await clock.pass(0);
    send();
    await clock.pass(2000);
    expect(states).toEqual(['opening', 'open']);
  });

  it('opens anew when asked to', async () => {
    const { clock, supervisor, opened, transports } = supervised();
    supervisor.start();
    await clock.pass(10);
    supervisor.reopen();
    await clock.pass(10);
    expect(opened()).toBe(2);
    expect(transports.map(({ open }) => open)).toEqual([false, true]);
  });

  it('stops from every state, leaving nothing open and no timer', async () => {
    for (const opening of ['works', 'fails', 'hangs'] as const) {
      for (const after of [0, 10, 4000]) {
        const { clock, supervisor, line, transports, states } = supervised();
        line.opening = opening;
        supervisor.start();
        await clock.pass(after);
        const stopped = supervisor.stop();
        await clock.pass(6000);
        await stopped;
        expect(states.at(-1)).toBe('stopped');
        expect(clock.pending).toBe(0);
        expect(transports.filter(({ open }) => open)).toEqual([]);
      }
    }
  });
});
