# SPDX-License-Identifier: Apache-2.0
"""The first inputs of the fuzz corpora, made from what the project has.

    seeds.py FOLDER DRIVETRIAL    (a folder a target in FOLDER; path of the program)

Golden cases become inputs of the file targets, the standard's own examples
those of the reply paths, and short rehearsals the recorded runs. Names are
hashes of the contents, so that it may be run again.
"""
import hashlib
import pathlib
import struct
import subprocess
import sys
import tempfile

HERE = pathlib.Path(__file__).resolve().parent
GOLDEN = HERE.parent / "golden"
DEFECTS = [None, "sluggish", "out-of-range-accepted", "frozen-image"]


def put(target, data):
    folder = pathlib.Path(sys.argv[1]) / target
    folder.mkdir(parents=True, exist_ok=True)
    (folder / hashlib.sha1(data).hexdigest()[:12]).write_bytes(data)


def files():
    for case in sorted(GOLDEN.glob("*/")):
        rig, suite = case / "rig.yaml", case / "suite.yaml"
        if suite.exists():
            put("suite", suite.read_bytes())
        elif rig.exists() and case.name.startswith("yaml-") and rig.stat().st_size < 4000:
            put("yaml", rig.read_bytes())
        elif rig.exists() and rig.stat().st_size < 4000:
            put("rig", rig.read_bytes())
    put("rig", (HERE / "recording" / "rig.yaml").read_bytes())


def crc(frame):
    value = 0xFFFF
    for byte in frame:
        value ^= byte
        for _ in range(8):
            value = value >> 1 ^ 0xA001 if value & 1 else value >> 1
    return frame + struct.pack("<H", value)


# function index of fuzz_pdu.c, address, count, first word, reply (Modbus
# Application Protocol V1.1b3, section 6, and made by its rules)
REPLIES = [
    (0, 0x13, 0x13, 0, "0103cd6b05"), (1, 0xC4, 0x16, 0, "0203acdb35"),
    (2, 0x6B, 3, 0, "0306022b00000064"), (3, 8, 1, 0, "0402000a"),
    (4, 0xAC, 1, 1, "0500acff00"), (5, 1, 1, 3, "0600010003"), (6, 0x13, 10, 1, "0f0013000a"),
    (7, 1, 2, 0xA, "1000010002"), (8, 4, 0, 0xF2, "16000400f20025"),
    (9, 0, 0, 0, "2b0e04810000010007436f6d70616e79"), (10, 0, 0, 0x1101, "1102ff00"),
    (2, 0, 1, 0, "8302"), (10, 0, 0, 0x4101, "c101"),
]


def replies():
    for function, address, count, word, reply in REPLIES:
        reply = bytes.fromhex(reply)
        put("pdu", struct.pack(">BHHH", function, address, count, word) + reply)
    image = b"\x04\x06" + bytes(range(6))
    for tid, protocol, length, unit, pdu in [
            (1, 0, 9, 1, image), (7, 0, 9, 1, image), (1, 1, 9, 1, image), (1, 0, 3, 1, b"\x84\x02"),
            (1, 0, 9, 2, image), (1, 0, 65535, 1, image), (1, 0, 1, 1, b"")]:
        frame = struct.pack(">HHHB", tid, protocol, length, unit) + pdu
        put("tcp", b"\x00\x01\x02" + frame)
        put("tcp", bytes([len(frame)]) + b"\x01\x02" + frame + frame)
    for function, frame in [(1, b"\x01" + image), (1, b"\x01\x84\x02"), (1, b"\x02" + image),
                            (0, b"\x01\x2b\x0e\x04\x81\x00\x00\x01\x00\x03abc"), (1, b"\x01\x41\x00")]:
        put("rtu", bytes([function, 2]) + crc(frame))
        put("rtu", bytes([function | 2, 2]) + frame)
        put("rtu", bytes([function, 2]) + frame + b"\xff\xff")


def requests():
    for pdu in ["0400000009", "0300000003", "0500" "00ff00", "0600001388", "10000000010203e8",
                "0f000000040105", "160001000200ff", "2b0e0100", "2b0e0402", "2b0e0401",
                "17000000020001000102" "0001", "0100000004", "41", "03ffff0002", "0300000000"]:
        data = bytes.fromhex(pdu)
        for link, unit in ((0, 1), (1, 2), (1, 5), (1, 9)):
            put("served", bytes([link, unit, len(data)]) + data)


def cut(path):
    """The first rows of a samples file: its header says how long it is."""
    data = path.read_bytes()
    start = 10 + struct.unpack_from("<H", data, 8)[0]
    return data[:start + 24 * 12]


def recordings(program):
    for defect in DEFECTS:
        with tempfile.TemporaryDirectory() as base:
            out = pathlib.Path(base) / "run"
            extra = ["--defect", defect] if defect else []
            subprocess.run([program, "rehearse", "--quiet", "--rig", HERE / "recording/rig.yaml",
                            "--out", out, *extra, HERE / "recording/suite.yaml"],
                           stdout=subprocess.DEVNULL, check=False)
            parts = [(out / "journal.jsonl").read_bytes().rstrip(b"\n")]
            parts += [cut(path) for path in sorted((out / "samples").glob("*.npy"))]
            put("recording", b"\nSAMPLES\n".join(parts))


def main():
    files()
    replies()
    requests()
    recordings(sys.argv[2])


if __name__ == "__main__":
    main()
