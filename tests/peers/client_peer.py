# SPDX-License-Identifier: Apache-2.0
"""An independent Modbus client (python3-pymodbus) reads and drives `drivetrial serve`.

client_peer.py DRIVETRIAL tcp|rtu. Exit status 77: the module is missing.
"""
import os
import select
import signal
import struct
import subprocess
import sys
import time

try:
    from pymodbus.client import ModbusSerialClient, ModbusTcpClient
    from pymodbus.mei_message import ReadDeviceInformationRequest
    from pymodbus.pdu import ExceptionResponse
except ImportError as missing:
    print(f"skipped: {missing}")
    sys.exit(77)

RIG = os.path.join(os.path.dirname(os.path.abspath(__file__)), "..", "unit", "rigs", "served.yaml")
PATIENCE_S = 30
wrong = []


def expect(what, have, want):
    if have != want:
        wrong.append(f"{what}: {have!r}, expected {want!r}")


def line_of(process, begins):
    """The next line that begins so; empty after PATIENCE_S."""
    until = time.monotonic() + PATIENCE_S
    while select.select([process.stdout], [], [], max(0, until - time.monotonic()))[0]:
        line = process.stdout.readline()
        if not line or line.startswith(begins):
            return line.strip()
    return ""


def wait_until(condition):
    until = time.monotonic() + PATIENCE_S
    while time.monotonic() < until:
        if condition():
            return True
    return False


def state_of(process):
    """What the model says of its shaft, past all clients."""
    process.send_signal(signal.SIGUSR1)
    return line_of(process, "state ").split(" ")[1]


def signed(word):
    return struct.unpack(">h", struct.pack(">H", word))[0]


def real(registers, low_first=False):
    return struct.unpack(">f", struct.pack(">2H", *(registers[::-1] if low_first else registers)))[0]


def drive_over_tcp(address, process):
    host, port = address[len("tcp:"):].rsplit(":", 1)
    client = ModbusTcpClient(host, port=int(port), timeout=PATIENCE_S)
    expect("connect", client.connect(), True)
    text = client.read_input_registers(20, 8, slave=1).registers
    expect("firmware", struct.pack(">8H", *text).rstrip(b"\0"), b"2.4.1")
    expect("speed command", client.write_register(0, 3000, slave=1).isError(), False)
    expect("read back", client.read_holding_registers(0, 3, slave=1).registers, [3000, 0, 0])
    expect("control", client.write_registers(1, [1, 0], slave=1).isError(), False)
    reached = wait_until(
        lambda: abs(signed(client.read_input_registers(0, 1, slave=1).registers[0]) - 3000) < 50)
    expect("the drive runs up to 600 rpm", reached, True)
    expect("state of the shaft", state_of(process), "moving")
    expect("mask", client.mask_write_register(address=2, and_mask=0xFFF0, or_mask=0x0007,
                                              unit=1).isError(), False)
    expect("masked", client.read_holding_registers(2, 1, slave=1).registers, [7])
    client.write_register(2, 0, slave=1)
    both = client.readwrite_registers(read_address=0, read_count=2, write_address=0,
                                      write_registers=[0], unit=1)
    expect("written before read", both.registers, [0, 1])
    refusals = [
        ("outside", client.read_input_registers(900, 1, slave=1), 2),
        ("beyond the range", client.write_register(1, 7, slave=1), 3),
        ("no coils", client.read_coils(0, 1, slave=1), 2),
        ("unit", client.read_input_registers(0, 1, slave=9), 0x0B),
    ]
    for what, reply, code in refusals:
        expect(what, isinstance(reply, ExceptionResponse) and reply.exception_code, code)
    info = client.execute(ReadDeviceInformationRequest(read_code=1, object_id=0, unit=1))
    expect("identification", [info.information.get(i) for i in (1, 2)], [b"controller", b"2.4.1"])
    client.write_register(1, 0, slave=1)
    expect("the shaft comes to rest", wait_until(lambda: state_of(process) == "rest"), True)
    client.close()


def measure_over_rtu(address):
    client = ModbusSerialClient(address[len("rtu:"):], baudrate=115200, timeout=5)
    expect("open", client.connect(), True)
    speed, torque = (real(client.read_input_registers(at, 2, slave=3).registers) for at in (0, 2))
    expect("shaft at rest", abs(speed) < 1 and abs(torque) < 0.1, True)
    low, high = struct.unpack(">2H", struct.pack(">f", -1.25))[::-1]
    expect("load command", client.write_registers(0, [low, high], slave=2).isError(), False)
    expect("read back", real(client.read_holding_registers(0, 2, slave=2).registers, True), -1.25)
    half = client.write_register(0, 0, slave=2)
    expect("half of a value", isinstance(half, ExceptionResponse) and half.exception_code, 2)
    expect("coil", client.write_coil(1, True, slave=5).isError(), False)
    expect("coils", client.read_coils(0, 2, slave=5).bits[:2], [False, True])
    expect("coils at once", client.write_coils(0, [True, False], slave=5).isError(), False)
    expect("coils after", client.read_coils(0, 2, slave=5).bits[:2], [True, False])
    client.close()


def main(drivetrial, kind):
    process = subprocess.Popen(
        [drivetrial, "serve", "--rig", RIG, "--listen", "drive_wire=tcp:127.0.0.1:0"],
        stdout=subprocess.PIPE, text=True, bufsize=1)
    try:
        ready = line_of(process, "ready ")
        expect("it says ready", ready.startswith("ready "), True)
        addresses = dict(item.split("=", 1) for item in ready.split(" ")[1:])
        if kind == "tcp":
            drive_over_tcp(addresses["drive_wire"], process)
        else:
            measure_over_rtu(addresses["bench_wire"])
        process.terminate()
        expect("the shaft at the end", line_of(process, ("rest", "moving")).split(" ")[0], "rest")
        expect("exit code", process.wait(PATIENCE_S), 0)
    finally:
        if process.poll() is None:
            process.kill()
            process.wait()
    print("\n".join(wrong) if wrong else f"an independent client reads and drives it over {kind}")
    return 1 if wrong else 0


sys.exit(main(sys.argv[1], sys.argv[2]))
