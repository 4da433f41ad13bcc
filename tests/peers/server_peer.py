# SPDX-License-Identifier: Apache-2.0
"""An independent Modbus server (python3-pymodbus), driven by the project's client.

server_peer.py CLIENT tcp|rtu: serves a small register map, runs CLIENT against
it, and looks into the registers that CLIENT should have written. On rtu two
pseudo terminals are joined, since server and client each want a line to open.
Exit status 77: the module is missing.
"""
import asyncio
import os
import pty
import struct
import sys
import threading
import tty

try:
    from pymodbus.datastore import (ModbusSequentialDataBlock, ModbusServerContext,
                                    ModbusSlaveContext)
    from pymodbus.device import ModbusDeviceIdentification
    from pymodbus.server.async_io import ModbusSerialServer, ModbusTcpServer
    from pymodbus.transaction import ModbusRtuFramer, ModbusSocketFramer
except ImportError as missing:
    print(f"skipped: {missing}")
    sys.exit(77)

REAL = -1234.56787109375


def words(data):
    return list(struct.unpack(f">{len(data) // 2}H", data))


def swapped(data):
    """The two bytes of every register exchanged."""
    return b"".join(data[i + 1:i + 2] + data[i:i + 1] for i in range(0, len(data), 2))


def input_registers():
    real = struct.pack(">f", REAL)
    registers = words(struct.pack(">Hh", 43981, -12345))
    registers += words(struct.pack(">I", 4023233417))
    registers += words(real)
    registers += words(real)[::-1]
    registers += words(swapped(real))
    registers += words(swapped(real))[::-1]
    registers += words(struct.pack(">d", 3.141592653589793))
    registers += words(struct.pack(">q", -9007199254740991))[::-1]
    registers += words(struct.pack(">i", -19088744))[::-1]
    registers += [0xA508]  # bit 3 is set, bit 4 is not; the high byte is 165
    return registers


def make_context():
    holding = [0] * 40
    holding[4] = 0x1234
    slave = ModbusSlaveContext(
        di=ModbusSequentialDataBlock(0, [0, 0, 0, 1, 0, 0, 0, 0]),
        co=ModbusSequentialDataBlock(0, [0] * 32),
        hr=ModbusSequentialDataBlock(0, holding),
        ir=ModbusSequentialDataBlock(0, input_registers() + [0] * 8),
        zero_mode=True)
    return slave, ModbusServerContext(slaves={1: slave}, single=False)


def identity():
    return ModbusDeviceIdentification(info_name={
        "VendorName": "invented", "ProductCode": "peer", "MajorMinorRevision": "V2.11"})


def join_lines():
    """Two pseudo terminals whose masters are joined; the paths of both slaves."""
    ends = [pty.openpty(), pty.openpty()]
    for _, slave in ends:
        tty.setraw(slave)

    def copy(source, target):
        try:
            while True:
                data = os.read(source, 512)
                if not data:
                    return
                os.write(target, data)
        except OSError:
            return

    for source, target in ((0, 1), (1, 0)):
        threading.Thread(target=copy, args=(ends[source][0], ends[target][0]),
                         daemon=True).start()
    return os.ttyname(ends[0][1]), os.ttyname(ends[1][1])


async def serve_tcp(context):
    server = ModbusTcpServer(context, framer=ModbusSocketFramer, identity=identity(),
                             address=("127.0.0.1", 0))
    task = asyncio.create_task(server.serve_forever())
    await server.serving
    return task, "tcp", str(server.server.sockets[0].getsockname()[1])


async def serve_rtu(context):
    ours, theirs = join_lines()
    server = ModbusSerialServer(context, framer=ModbusRtuFramer, identity=identity(), port=ours,
                                baudrate=115200, timeout=1)
    await server.start()
    return asyncio.create_task(server.serve_forever()), "rtu", theirs


def verify(slave):
    torque = words(struct.pack(">f", 1.5))
    wanted = [
        ("speed", slave.getValues(3, 0, 1), words(struct.pack(">h", -7500))),
        ("torque, low word first", slave.getValues(3, 1, 2), torque[::-1]),
        ("mode, the bits beside it kept", slave.getValues(3, 4, 1), [0x12A4]),
        ("registers written at once", slave.getValues(3, 20, 2), [0x000A, 0x0102]),
        ("relay", [int(bit) for bit in slave.getValues(1, 2, 1)], [1]),
        ("coils written at once", [int(bit) for bit in slave.getValues(1, 8, 10)],
         [1, 0, 1, 1, 0, 0, 1, 1, 1, 0]),
    ]
    wrong = [f"{name}: {have}, expected {want}" for name, have, want in wanted if have != want]
    print("\n".join(wrong) if wrong else "the server's registers hold what was written")
    return not wrong


async def main(client, kind):
    slave, context = make_context()
    task, kind, where = await (serve_tcp if kind == "tcp" else serve_rtu)(context)
    process = await asyncio.create_subprocess_exec(client, kind, where)
    try:
        status = await asyncio.wait_for(process.wait(), 100)
    except asyncio.TimeoutError:
        process.kill()
        status = 1
    task.cancel()
    return 0 if status == 0 and verify(slave) else 1


os._exit(asyncio.run(main(sys.argv[1], sys.argv[2])))  # the copying threads never end
