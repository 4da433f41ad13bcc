# SPDX-License-Identifier: Apache-2.0
"""Every verb explains itself with two examples, and every name is in the reference."""
import re
import sys

from verbs import TOP, Claims, call


def main():
    claims = Claims()
    usage = call("--help")
    verbs = re.findall(r"^  drivetrial (\w+) ", usage.stdout, re.M)
    claims.that({"run", "rehearse", "plan", "survey", "schema", "help"} <= set(verbs), f"{verbs}")
    for verb in ("run", "rehearse", "plan", "survey", "schema", "help"):
        done = call(verb, "--help")
        examples = re.findall(rf"^  drivetrial {verb} ", done.stdout, re.M)
        claims.that(done.returncode == 0, f"{verb} --help ends with 0")
        claims.that(len(examples) >= 2, f"{verb} --help has two examples: {done.stdout}")
        wrong = call(verb, "--hlep")
        claims.that(wrong.returncode == 64 and "--help" in wrong.stderr,
                    f"{verb} suggests: {wrong.stderr}")
    reference = call("help", "reference").stdout
    listed = (TOP / "checks" / "check_list.h").read_text()
    for check in re.findall(r"^CHECK\((\w+)\)", listed, re.M):
        claims.that(f"### {check}\n" in reference, f"{check} is in the reference")
        claims.that("Metrics, for `limits`" in call("help", check).stdout, f"help {check}")
    names = call("help", "--help").stdout.split("checks:\n")[1].split()
    for name in [n for n in names if not n.endswith(":")]:
        if name not in ("steps", "derived", "channels", "keys", "of", "units"):
            claims.that(name in reference, f"{name} is in the reference")
    for wrong, right in (("step_respnse", "step_response"), ("chanel", "channel"),
                         ("awiat", "await")):
        done = call("help", wrong)
        claims.that(done.returncode == 64 and f"'{right}'" in done.stderr, f"{wrong}: {done.stderr}")
    claims.that("rpm" in call("help", "rpm").stdout, "a unit is explained")
    claims.end()


if __name__ == "__main__":
    sys.exit(main())
