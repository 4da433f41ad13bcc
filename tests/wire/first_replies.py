# SPDX-License-Identifier: Apache-2.0
"""A few spoilt replies at the begin and nothing else: the identity is read again, and the run
goes on. A wire that never answers: the run is refused before anything is commanded."""
import pathlib
import subprocess
import sys
import threading

sys.path.insert(0, str(pathlib.Path(__file__).resolve().parents[1] / "bench"))
import bench  # noqa: E402
from proxy import Dice, TcpProxy  # noqa: E402

SPOILT = ["drop_reply", "exception_6", "wrong_unit", None, "reset", "truncate", "drop_request"]


class Script(Dice):
    """Fates in a fixed order, then none."""

    def __init__(self, fates, after):
        super().__init__(1, 0, [])
        self.fates, self.after = list(fates), after
        self.guard = threading.Lock()

    def fate(self):
        with self.guard:
            self.transactions += 1
            return self.fates.pop(0) if self.fates else self.after


def run(fates, after):
    with bench.folder() as base, bench.Served() as server:
        proxy = TcpProxy(server.addresses["drive_wire"], Script(fates, after), 0.1)
        server.addresses["drive_wire"] = proxy.address
        try:
            done = bench.run(server, bench.SMOKE, f"{base}/run", "--only", "SMK-01")
            events = done.journal() if (done.folder / "journal.jsonl").exists() else []
        finally:
            proxy.stop()
        return done, [event for event in events if event["event"] == "command"], server.state()


def main():
    checks = bench.Checks()
    done, commands, state = run(SPOILT, None)
    checks.that(done.code not in (69, 70), f"spoilt replies: exit {done.code}\n{done.stderr}")
    checks.that(bool(commands), "spoilt replies: nothing was commanded")
    checks.that(state[0] == "rest", f"spoilt replies: {state}")
    done, commands, state = run([], "drop_reply")
    checks.that(done.code == 69, f"no replies: exit {done.code}\n{done.stderr}")
    checks.that(not commands, f"no replies: {len(commands)} commands")
    checks.that("cannot read the identity of controller" in done.stderr, done.stderr)
    checks.exit()


if __name__ == "__main__":
    try:
        main()
    except subprocess.TimeoutExpired as error:
        sys.exit(f"it hangs: {error}")
