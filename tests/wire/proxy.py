# SPDX-License-Identifier: Apache-2.0
"""A wire between runner and bench that goes wrong at random moments.

TcpProxy listens on a free port of loopback and passes Modbus TCP on; RtuProxy
does so between two pseudo terminals. A Dice, seeded, decides for each
transaction whether it is spoilt and how, and counts what was done.

What is not done, since no client can see it: other values in a TCP reply that
is otherwise whole (Modbus TCP has no checksum of its own), an exception that a
device did not mean although its write was carried out, and on a serial line a
reply that comes later than the client's quiet time (RTU has no transaction
number). Exceptions are therefore given instead of the transaction.
"""
import os
import pty
import random
import select
import socket
import struct
import threading
import time
import tty

EXCEPTIONS = [f"exception_{code}" for code in range(1, 12)]
TCP_KINDS = ["drop_request", "late_request", "drop_reply", "delay_short", "delay_long", "duplicate",
             "truncate", "corrupt", "reorder", "wrong_transaction", "wrong_unit", "wrong_length",
             "wrong_protocol", "dribble", "reset", "half_open", "flood_noise",
             "flood_frames", *EXCEPTIONS]
RTU_KINDS = ["drop_request", "spoil_request", "drop_reply", "delay_short", "late_reply", "double",
             "missing_bytes", "bad_checksum", "noise_before", "noise_after", "echo", "wrong_unit",
             "wrong_function", "dribble", "silence", "flood_noise", *EXCEPTIONS]
# Those that take a link away for long are rarer, or nothing else would be seen.
RARE = {"half_open": 0.15, "silence": 0.15}


class Dice:
    """Which transactions are spoilt, and how; counts of what was done."""

    def __init__(self, seed, rate, kinds):
        self.random = random.Random(seed)
        self.rate, self.kinds = rate, kinds
        self.weights = [RARE.get(kind, 0.4 if kind in EXCEPTIONS else 1.0) for kind in kinds]
        self.counts = {}
        self.transactions = 0
        self.lock = threading.Lock()

    def fate(self):
        with self.lock:
            self.transactions += 1
            if self.random.random() >= self.rate:
                return None
            kind = self.random.choices(self.kinds, self.weights)[0]
            self.counts[kind] = self.counts.get(kind, 0) + 1
            return kind

    def between(self, least, most):
        with self.lock:
            return self.random.uniform(least, most)

    def whole(self, least, most):
        with self.lock:
            return self.random.randint(least, most)

    def bytes(self, count):
        with self.lock:
            return self.random.randbytes(count)


def close_hard(sock):
    """Ends a connection with a reset."""
    try:
        sock.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, struct.pack("ii", 1, 0))
        sock.close()
    except OSError:
        pass


class Connection:
    """One client and its connection to the bench; a thread for each direction."""

    def __init__(self, proxy, client):
        self.proxy, self.client, self.dice = proxy, client, proxy.dice
        self.server = socket.create_connection(proxy.target)
        self.fates, self.last = {}, b""
        self.sending = threading.Lock()
        for sock in (self.client, self.server):
            sock.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        for loop in (self.requests, self.replies):
            threading.Thread(target=self.run, args=(loop,), daemon=True).start()

    def run(self, loop):
        try:
            loop()
        except OSError:
            pass
        for sock in (self.client, self.server):
            try:
                sock.shutdown(socket.SHUT_RDWR)
            except OSError:
                pass
        self.proxy.forget(self)

    def close(self):
        close_hard(self.client)
        close_hard(self.server)

    @staticmethod
    def frame(sock):
        """One whole frame, or OSError where the connection has ended."""
        data = b""
        while len(data) < 6 or len(data) < 6 + struct.unpack_from(">H", data, 4)[0]:
            wanted = 6 if len(data) < 6 else 6 + struct.unpack_from(">H", data, 4)[0]
            got = sock.recv(wanted - len(data))
            if not got:
                raise ConnectionError
            data += got
        return data

    def requests(self):
        while True:
            frame = self.frame(self.client)
            if self.proxy.dead():
                continue
            fate = self.dice.fate()
            if fate == "drop_request":
                continue
            if fate == "late_request":
                wait = self.proxy.timeout * self.dice.between(1.05, 2)
                threading.Timer(wait, self.send_late, (frame,)).start()
                continue
            if fate in EXCEPTIONS:
                code = int(fate.split("_")[1])
                self.send(frame[:4] + b"\0\x03" + frame[6:7] + bytes([frame[7] | 0x80, code]))
                continue
            if fate == "half_open":
                self.proxy.die_for(self.proxy.timeout * self.dice.between(0.5, 3))
                continue
            self.fates[frame[:2]] = fate
            self.server.sendall(frame)

    def send_late(self, frame):
        try:
            self.server.sendall(frame)
        except OSError:
            pass

    def send(self, data):
        with self.sending:
            self.client.sendall(data)

    def replies(self):
        while True:
            frame = self.frame(self.server)
            fate = self.fates.pop(frame[:2], None)
            if self.proxy.dead():
                continue
            if fate is None:
                self.send(frame)
            else:
                getattr(self, fate)(frame)
            self.last = frame

    # what each kind does to a reply

    def drop_reply(self, frame):
        pass

    def delay_short(self, frame):
        time.sleep(self.proxy.timeout * self.dice.between(0.05, 0.8))
        self.send(frame)

    def delay_long(self, frame):
        time.sleep(self.proxy.timeout * self.dice.between(1.05, 3))
        self.send(frame)

    def duplicate(self, frame):
        self.send(frame)
        if self.dice.whole(0, 1):
            time.sleep(self.dice.between(0, 0.004))
        self.send(frame)

    def truncate(self, frame):
        self.send(frame[:self.dice.whole(1, len(frame) - 1)])

    def corrupt(self, frame):
        """Flips bits where the protocol can see it: of a read not in the values."""
        seen = 9 if frame[7] in (1, 2, 3, 4) else len(frame)
        data = bytearray(frame)
        at = self.dice.whole(0, min(seen, len(data)) - 1)
        data[at] ^= self.dice.whole(1, 255)
        self.send(bytes(data))

    def reorder(self, frame):
        """An older reply comes first."""
        self.send((self.last or frame) + frame)

    def wrong_transaction(self, frame):
        number = (struct.unpack_from(">H", frame)[0] + self.dice.whole(1, 65535)) & 0xFFFF
        self.send(struct.pack(">H", number) + frame[2:])

    def wrong_unit(self, frame):
        self.send(frame[:6] + bytes([(frame[6] + self.dice.whole(1, 255)) & 0xFF]) + frame[7:])

    def wrong_length(self, frame):
        length = struct.unpack_from(">H", frame, 4)[0]
        wrong = (length + self.dice.whole(1, 65535)) & 0xFFFF
        self.send(frame[:4] + struct.pack(">H", wrong) + frame[6:])

    def wrong_protocol(self, frame):
        self.send(frame[:2] + struct.pack(">H", self.dice.whole(1, 65535)) + frame[4:])

    def dribble(self, frame):
        pause = self.proxy.timeout * self.dice.between(0.05, 1.5) / len(frame)
        for i in range(len(frame)):
            self.send(frame[i:i + 1])
            time.sleep(pause)

    def reset(self, frame):
        if self.dice.whole(0, 1):
            self.send(frame[:self.dice.whole(1, len(frame))])
        self.close()

    def flood_noise(self, frame):
        for _ in range(self.dice.whole(1, 16)):
            self.send(self.dice.bytes(4096))
        self.send(frame)

    def flood_frames(self, frame):
        """Whole frames of other transactions, and the reply somewhere among them."""
        number = struct.unpack_from(">H", frame)[0]
        count = self.dice.whole(10, 600)
        data = b"".join(struct.pack(">H", (number - 1 - i) & 0xFFFF) + frame[2:]
                        for i in range(count))
        at = self.dice.whole(0, count) * len(frame)
        self.send(data[:at] + frame + data[at:])


class TcpProxy:
    """`address` stands for the bench's own in --link."""

    def __init__(self, address, dice, timeout):
        host, port = address.removeprefix("tcp:").rsplit(":", 1)
        self.target, self.dice, self.timeout = (host, int(port)), dice, timeout
        self.listener = socket.create_server(("127.0.0.1", 0))
        self.address = "tcp:127.0.0.1:%d" % self.listener.getsockname()[1]
        self.connections, self.lock = set(), threading.Lock()
        self.dead_until, self.cut = 0.0, None
        threading.Thread(target=self.accept, daemon=True).start()

    def dead(self):
        return self.cut or time.monotonic() < self.dead_until

    def die_for(self, seconds):
        self.dead_until = time.monotonic() + seconds

    def cut_now(self, how):
        """Takes the wire away for good: 'silent' accepts and never answers, 'refused' has no
        listener any more."""
        self.cut = how
        if how == "refused":
            self.stop()

    def accept(self):
        while True:
            try:
                client, _ = self.listener.accept()
            except OSError:
                return
            try:
                connection = Connection(self, client)
            except OSError:
                client.close()
                continue
            with self.lock:
                self.connections.add(connection)

    def forget(self, connection):
        with self.lock:
            self.connections.discard(connection)
        for sock in (connection.client, connection.server):
            sock.close()

    def stop(self):
        try:
            self.listener.shutdown(socket.SHUT_RDWR)
        except OSError:
            pass
        self.listener.close()
        with self.lock:
            connections = list(self.connections)
        for connection in connections:
            connection.close()


def checksum(data):
    """CRC-16 of Modbus over Serial Line V1.02, low byte first."""
    crc = 0xFFFF
    for byte in data:
        crc ^= byte
        for _ in range(8):
            crc = crc >> 1 ^ 0xA001 if crc & 1 else crc >> 1
    return struct.pack("<H", crc)


def request_length(data):
    """Of a request frame; None: more bytes are needed to say."""
    if len(data) < 2:
        return None
    function = data[1]
    if function in (15, 16):
        return None if len(data) < 7 else 9 + data[6]
    return {22: 10, 43: 7}.get(function, 8)


def reply_length(data):
    if len(data) < 3:
        return None
    function = data[1]
    if function & 0x80:
        return 5
    if function in (1, 2, 3, 4):
        return 5 + data[2]
    if function == 43:
        return None if len(data) < 10 else 12 + data[9]
    return 10 if function == 22 else 8


class RtuProxy:
    """One thread; what waits is kept with its time. `address` as of TcpProxy."""

    def __init__(self, address, dice, timeout):
        self.dice, self.timeout = dice, timeout
        self.server = os.open(address.removeprefix("rtu:"), os.O_RDWR | os.O_NOCTTY)
        tty.setraw(self.server)
        self.client, self.slave = pty.openpty()
        tty.setraw(self.slave)
        self.address = "rtu:" + os.ttyname(self.slave)
        self.queue = []  # (when, bytes) to the client
        self.dead_until, self.cut, self.ended = 0.0, None, False
        self.fate, self.request = None, b""
        self.wake, self.waker = os.pipe()
        self.thread = threading.Thread(target=self.loop, daemon=True)
        self.thread.start()

    def dead(self):
        return self.cut or time.monotonic() < self.dead_until

    def cut_now(self, how):
        self.cut = how

    def stop(self):
        if self.ended:
            return
        self.ended = True
        os.write(self.waker, b"x")
        self.thread.join()
        for fd in (self.client, self.slave, self.server, self.wake, self.waker):
            os.close(fd)

    def later(self, seconds, data):
        self.queue.append((time.monotonic() + seconds, data))
        self.queue.sort(key=lambda entry: entry[0])

    def loop(self):
        request, reply = b"", b""
        while not self.ended:
            now = time.monotonic()
            while self.queue and self.queue[0][0] <= now:
                data = self.queue.pop(0)[1]
                if not self.dead():
                    os.write(self.client, data)
            wait = self.queue[0][0] - now if self.queue else 1.0
            ready, _, _ = select.select([self.client, self.server, self.wake], [], [], wait)
            if self.client in ready:
                request = self.take(request + os.read(self.client, 512), request_length,
                                    self.on_request)
            if self.server in ready:
                reply = self.take(reply + os.read(self.server, 512), reply_length, self.on_reply)

    @staticmethod
    def take(data, length_of, act):
        length = length_of(data)
        while length is not None and len(data) >= length:
            act(data[:length])
            data = data[length:]
            length = length_of(data)
        return data

    def on_request(self, frame):
        self.request, self.fate = frame, None
        if self.dead():
            return
        fate = self.dice.fate()
        if fate == "drop_request":
            return
        if fate in EXCEPTIONS:
            data = bytes([frame[0], frame[1] | 0x80, int(fate.split("_")[1])])
            self.later(0, data + checksum(data))
        elif fate == "silence":
            self.dead_until = time.monotonic() + self.timeout * self.dice.between(1, 4)
        elif fate == "spoil_request":
            os.write(self.server, self.spoil(frame))
        else:
            self.fate = fate
            os.write(self.server, frame)

    def spoil(self, frame):
        """One to three bits, which the checksum always sees within a frame of this length."""
        data = bytearray(frame)
        for _ in range(self.dice.whole(0, 1) * 2 + 1):
            data[self.dice.whole(0, len(data) - 1)] ^= 1 << self.dice.whole(0, 7)
        return self.spoil(frame) if bytes(data) == frame else bytes(data)

    def on_reply(self, frame):
        fate, self.fate = self.fate, None
        if fate is None:
            self.later(0, frame)
        elif fate != "drop_reply":
            getattr(self, fate)(frame)

    def delay_short(self, frame):
        self.later(self.timeout * self.dice.between(0.05, 0.8), frame)

    def late_reply(self, frame):
        """After the timeout, but within the client's quiet time (100 ms or more)."""
        self.later(self.timeout + self.dice.between(0.005, 0.06), frame)

    def double(self, frame):
        self.later(0, frame + frame)

    def missing_bytes(self, frame):
        at = self.dice.whole(0, len(frame) - 1)
        end = min(len(frame), at + self.dice.whole(1, 4))
        self.later(0, frame[:at] + frame[end:])

    def bad_checksum(self, frame):
        self.later(0, self.spoil(frame))

    def noise_before(self, frame):
        self.later(0, self.dice.bytes(self.dice.whole(1, 5)) + frame)

    def noise_after(self, frame):
        self.later(0, frame + self.dice.bytes(self.dice.whole(1, 5)))

    def echo(self, frame):
        self.later(0, self.request + frame)

    def wrong_unit(self, frame):
        data = bytes([(frame[0] + self.dice.whole(1, 246)) & 0xFF]) + frame[1:-2]
        self.later(0, data + checksum(data))

    def wrong_function(self, frame):
        data = bytes([frame[0], frame[1] ^ self.dice.whole(1, 0x7F)]) + frame[2:-2]
        self.later(0, data + checksum(data))

    def dribble(self, frame):
        pause = self.timeout * self.dice.between(0.05, 1.3) / len(frame)
        for i in range(len(frame)):
            self.later(i * pause, frame[i:i + 1])

    def flood_noise(self, frame):
        self.later(0, self.dice.bytes(self.dice.whole(200, 2000)) + frame)
