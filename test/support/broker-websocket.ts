/** A WebSocket door (RFC 6455) in front of a broker's TCP port: binary frames in, binary frames out. */
import { createHash } from 'node:crypto';
import { createServer } from 'node:http';
import { connect, type Socket } from 'node:net';
import type { Duplex } from 'node:stream';
import { opened, type TestBroker } from './broker.ts';

export async function startWebSocketDoor(target: number): Promise<TestBroker> {
  const open = new Set<Duplex>();
  const server = createServer();
  server.on('upgrade', (request, socket: Duplex) => {
    // RFC 6455, 1.3
    const key = `${request.headers['sec-websocket-key']}258EAFA5-E914-47DA-95CA-C5AB0DC85B11`;
    const accept = createHash('sha1').update(key).digest('base64');
    const head = ['HTTP/1.1 101 Switching Protocols', 'Upgrade: websocket', 'Connection: Upgrade'];
    socket.write(
      [...head, `Sec-WebSocket-Accept: ${accept}`, 'Sec-WebSocket-Protocol: mqtt', '', ''].join('\r\n'),
    );
    const far = connect(target, '127.0.0.1');
    for (const end of [socket, far]) {
      open.add(end);
      end.on('error', () => end.destroy());
      end.on('close', () => {
        open.delete(end);
        socket.destroy();
        far.destroy();
      });
    }
    far.on('data', (chunk: Buffer) => {
      // A length of two bytes says at most 65 535.
      for (let at = 0; at < chunk.length; at += 32_768) socket.write(frame(chunk.subarray(at, at + 32_768)));
    });
    unframe(socket, far);
  });
  return await opened(server, open);
}

/** RFC 6455, 5.2: final binary frame, not masked. */
function frame(bytes: Buffer): Buffer {
  const head = Buffer.from([0x82, 126, bytes.length >> 8, bytes.length & 255]);
  return Buffer.concat([bytes.length < 126 ? Buffer.from([0x82, bytes.length]) : head, bytes]);
}

function unframe(from: Duplex, to: Socket): void {
  let buffer = Buffer.alloc(0);
  from.on('data', (chunk: Buffer) => {
    buffer = Buffer.concat([buffer, chunk]);
    for (;;) {
      const short = buffer.length < 2 ? 0 : buffer[1]! & 127;
      const start = short === 126 ? 8 : 6;
      if (buffer.length < start) return;
      const length = short === 126 ? buffer.readUInt16BE(2) : short;
      if (buffer.length < start + length) return;
      const mask = buffer.subarray(start - 4, start);
      const payload = buffer.subarray(start, start + length).map((byte, i) => byte ^ mask[i % 4]!);
      if ((buffer[0]! & 15) === 8) from.end();
      else to.write(payload);
      buffer = buffer.subarray(start + length);
    }
  });
}
