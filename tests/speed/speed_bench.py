# SPDX-License-Identifier: Apache-2.0
"""Runs against servers that cost little, for the benchmark of sampling.

Rigs and suites are written for the purpose; all data are invented. A rig is
attended, since a speed test has no interlocks to offer, so the question is
answered on a pseudo terminal.
"""
import json
import os
import pathlib
import pty
import re
import subprocess
import tempfile
import threading
import time

import numpy

TOP = pathlib.Path(__file__).resolve().parents[2]
BUILD = pathlib.Path(os.environ.get("DRIVETRIAL", TOP / "build" / "gcc" / "drivetrial")).parent
DRIVETRIAL = str(BUILD / "drivetrial")
BARE = str(BUILD / "tests" / "bare_loop")
SERVER = str(BUILD / "tests" / "speed_server")

MACHINE = ("{pole_pairs: 4, flux_linkage: 0.085 Wb_peak, rated_speed: 3000 rpm, "
           "rated_torque: 2.4 Nm, rated_current: 3.4 A_rms, dc_voltage: 310 V, encoder_lines: 1024}")


def rig_text(links, registers, in_flight=1, served=False):
    """links: (name, address as in a rig file). The first has the device under test."""
    lines = ["rig: speed-bench", "note: invented, for the benchmark of sampling",
             "attendance: attended", "links:"]
    lines += [f"  {name}: {{{address}, reply_timeout: 1 s}}" for name, address in links]
    lines.append("devices:")
    for i, (name, _) in enumerate(links):
        flight = f", in_flight: {in_flight}" if in_flight > 1 else ""
        lines.append(f"  device_{i}: {{link: {name}, unit: {i + 1}"
                     f"{', under_test: true' if i == 0 else ''}{flight}}}")
    lines += [f"machine: {MACHINE}", "channels:"]
    for i in range(len(links)):
        lines += [f"  d{i}r{r}: {{device: device_{i}, input_register: {r}, type: int16}}"
                  for r in range(registers)]
    lines += ["  command: {device: device_0, holding_register: 0, type: int16, command: true, "
              "between: [-1, 1]}",
              "safe_state:", "  - set: {command: 0}",
              "  - await: {channel: d0r1, between: [-100, 100], for: 20 ms, timeout: 5 s}"]
    if served:
        lines += ["model:", "  serves:", "    command: controller.control"]
        lines += [f"    d0r{r}: controller.fault_code" for r in range(registers)]
    return "\n".join(lines) + "\n"


def suite_text(every, seconds, registers, links=1):
    channels = ", ".join(f"d{i}r{r}" for i in range(links) for r in range(registers))
    watched = "d0r1" if registers > 1 else "d0r0"
    return f"""suite: speed
sample: {{every: {every}, channels: [{channels}]}}
tests:
  - test: SPEED
    title: Sampling for {seconds} s
    stimulus:
      - hold: {seconds} s
        mark: begin
    checks:
      - stays_within:
          channel: {watched}
          window: {{from: begin}}
          between: [-30000, 30000]
          ignore_shorter_than: 1 s
          limits:
            largest: {{max: 30000}}
"""


class Server:
    """speed_server on free ports; ends when its input does."""

    def __init__(self, *delays_ms):
        self.process = subprocess.Popen([SERVER, *map(str, delays_ms)], stdin=subprocess.PIPE,
                                        stdout=subprocess.PIPE, text=True)
        self.ports = [int(word) for word in self.process.stdout.readline().split()[1:]]

    def __enter__(self):
        return self

    def __exit__(self, *unused):
        self.process.stdin.close()
        self.process.stdout.close()
        self.process.wait(timeout=20)


class PacedLine:
    """`drivetrial serve` on a pty that is as slow as a line of this rate."""

    def __init__(self, folder, baud, registers):
        self.rig = pathlib.Path(folder) / f"line-{baud}.yaml"
        self.rig.write_text(rig_text([("line", f"rtu: /dev/ttyS0, baud: {baud}, parity: even")],
                                     registers, served=True))
        self.process = subprocess.Popen(
            [DRIVETRIAL, "serve", "--rig", str(self.rig), "--listen", f"line=rtu:{baud}"],
            stdout=subprocess.PIPE, text=True)
        ready = self.process.stdout.readline()
        if not ready.startswith("ready "):
            raise RuntimeError(f"the served line did not start: {ready!r}")
        self.path = ready.split("line=rtu:")[1].split()[0]

    def __enter__(self):
        return self

    def __exit__(self, *unused):
        self.process.terminate()
        self.process.communicate(timeout=20)


def cpu_ns(pid):
    """CPU time of all threads of a process."""
    total = 0
    for task in pathlib.Path(f"/proc/{pid}/task").iterdir():
        total += int((task / "schedstat").read_text().split()[0])
    return total


class Run:
    """One run of drivetrial, and what its samples say of the pace."""

    def __init__(self, rig, suite, options=()):
        with tempfile.TemporaryDirectory(prefix="drivetrial-speed-") as folder:
            top = pathlib.Path(folder)
            (top / "rig.yaml").write_text(rig)
            (top / "suite.yaml").write_text(suite)
            command = [DRIVETRIAL, "run", "--quiet", "--rig", str(top / "rig.yaml"),
                       str(top / "suite.yaml"), "--out", str(top / "out"), *options]
            self.run(command, top / "out" / "journal.jsonl")
            self.read(top / "out")

    def run(self, command, journal):
        master, slave = pty.openpty()
        process = subprocess.Popen(command, stdin=slave, stderr=slave, stdout=subprocess.DEVNULL)
        os.close(slave)
        said = []
        reader = threading.Thread(target=drain, args=(master, said))
        reader.start()
        os.write(master, b"yes\n")
        self.cpu = watch_cpu(process, journal)
        self.code = process.wait()
        reader.join()
        os.close(master)
        if self.code > 2:
            raise RuntimeError(f"exit code {self.code}: {b''.join(said).decode(errors='replace')}")

    def read(self, out):
        events = [json.loads(line) for line in (out / "journal.jsonl").read_text().splitlines()]
        end = [event for event in events if event["event"] == "test_end"][-1]
        self.missed = end.get("missed_slots", 0)
        self.lost = end.get("lost_replies", 0)
        self.realtime = events[-1].get("realtime", "")
        self.blocks = [numpy.load(path) for path in sorted((out / "samples").glob("*.npy"))]

    def rate(self, block=0):
        earliest = self.blocks[block]["earliest"]
        return (len(earliest) - 1) / (earliest[-1] - earliest[0]) * 1e9

    def lateness(self, period_ns):
        """(lateness of each row from the earliest, slots without a row)."""
        earliest = self.blocks[0]["earliest"].astype("i8")
        phase = earliest % period_ns
        tenth = period_ns // 10
        folded = (phase - int(numpy.median(phase)) + tenth) % period_ns - tenth
        slots = (earliest - folded - earliest[0] + folded[0] + period_ns // 2) // period_ns
        return folded - folded.min(), int(slots[-1] - slots[0] + 1 - len(slots))


def drain(fd, said):
    while True:
        try:
            data = os.read(fd, 4096)
        except OSError:
            return
        if not data:
            return
        said.append(data)


def watch_cpu(process, journal):
    """CPU seconds for each second while the stimulus runs; NaN where it was too short to see."""
    begin = None
    while process.poll() is None:
        text = journal.read_text() if journal.exists() else ""
        if '"stimulus"' in text and begin is None:
            time.sleep(0.1)
            begin = last = (time.monotonic(), cpu_ns(process.pid))
        if begin:
            if '"stimulus_end"' in text:
                break
            try:
                last = (time.monotonic(), cpu_ns(process.pid))
            except (FileNotFoundError, ProcessLookupError):
                break
        time.sleep(0.02)
    if not begin or last[0] <= begin[0]:
        return float("nan")
    return (last[1] - begin[1]) / 1e9 / (last[0] - begin[0])


class Bare:
    """The bare libmodbus loop."""

    def __init__(self, *words):
        line = subprocess.run([BARE, *map(str, words)], check=True, stdout=subprocess.PIPE,
                              text=True).stdout.split()
        self.reads, self.failed = int(line[0]), int(line[1])
        self.seconds, self.cpu_seconds = float(line[2]), float(line[3])
        self.median_ns, self.most_ns = int(line[4]), int(line[5])
        self.rate = self.reads / self.seconds
        self.cpu = self.cpu_seconds / self.seconds


PYMODBUS = """
import sys, time
from pymodbus.client import ModbusTcpClient
client = ModbusTcpClient("127.0.0.1", port=int(sys.argv[1]))
client.connect()
begin = time.monotonic()
reads = 0
while time.monotonic() - begin < float(sys.argv[2]):
    reads += len(client.read_input_registers(0, 32, slave=1).registers) == 32
print(reads / (time.monotonic() - begin))
"""


def pymodbus_rate(port, seconds):
    """Reads per second of a python3-pymodbus loop, or None where the module is missing."""
    done = subprocess.run(["/usr/bin/python3", "-c", PYMODBUS, str(port), str(seconds)],
                          stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    if re.search("No module named", done.stderr):
        return None
    if done.returncode != 0:
        raise RuntimeError(done.stderr)
    return float(done.stdout)
