# SPDX-License-Identifier: Apache-2.0
"""Suites that vary interval and limit, for the test of `plan`.

Every test of a suite is one way of sampling the same thing; every limit that is
tried is a check of its own, so one rehearsal decides them all.
"""

STEP = """  - test: {name}
    sample: {{every: {every} ms, channels: [bench_speed]}}
    stimulus:
      - set: {{control: 1}}
      - hold: {hold} ms
      - set: {{speed_command: 600 rpm}}
        mark: commanded
      - hold: {after} ms
    checks:
"""

FAULT = """  - test: {name}
    sample: {{every: {every} ms, channels: [bench_speed, shaft_torque, fault_code, running]}}
    stimulus:
      - set: {{control: 1, load_control: 1}}
      - set: {{speed_command: 600 rpm, load_command: 1 Nm}}
      - hold: 500 ms
      - set: {{encoder_open: 1}}
        mark: cause
      - hold: 600 ms
    restore:
      - set: {{control: 0, encoder_open: 0}}
      - hold: 30 ms
    checks:
"""

ANGLE = """  - test: {name}
    sample: {{every: {every} ms, channels: [bench_angle, bench_current, own_angle, shaft_torque]}}
    stimulus:
      - set: {{control: 1, load_control: 1}}
      - set: {{speed_command: 600 rpm}}
      - hold: 300 ms
      - set: {{load_command: 1.5 Nm}}
        mark: loaded
      - hold: 900 ms
    checks:
"""


def step_check(limits):
    return f"""      - step_response:
          channel: bench_speed
          from: commanded
          limits: {{{limits}}}
"""


def fault_check(limits):
    return f"""      - fault_reaction:
          from: cause
          indication: fault_code
          code: encoder_loss
          torque: shaft_torque
          torque_below: 0.3 Nm
          running: running
          limits: {{{limits}}}
"""


def within_check(ignore):
    return f"""      - stays_within:
          channel: bench_speed
          window: {{from: commanded, after: 200 ms}}
          between: [500 rpm, 700 rpm]
          ignore_shorter_than: {ignore} ms
          limits: {{inside: {{is: yes}}, largest: {{max: 650 rpm}}}}
"""


def angle_check(limits):
    return f"""      - torque_angle:
          channel: bench_angle
          current: bench_current
          torque: shaft_torque
          window: {{from: loaded, after: 350 ms, for: 500 ms}}
          limits: {{{limits}}}
"""


def frame_check(limit):
    return f"""      - alignment:
          own: own_angle
          bench: bench_angle
          current: bench_current
          window: {{from: loaded, after: 350 ms, for: 500 ms}}
          limits: {{frame_offset: {{min: -{limit} deg, max: {limit} deg}}}}
"""


def suite(fine):
    """The suite; with `fine` every test samples as fast as is useful: what is true."""
    text = "suite: variations\nvalues: {}\ntests:\n".replace("values: {}\n", "")
    for every, hold in ((1, 200), (2, 200), (5, 200), (10, 200), (20, 200), (20, 30), (60, 200)):
        text += STEP.format(name=f"STP-{every}-{hold}", every=1 if fine else every, hold=hold,
                            after=800)
        for limit in (12, 15, 15.5, 18, 20, 40):
            # Rise times are tried where samples resolve them; see the note in plan_truth.py.
            if every <= 2:
                text += step_check(f"rise_time: {{max: {limit} ms}}")
        for limit in (1, 2, 2.4, 2.6, 3, 5, 10):
            if every <= 2:
                text += step_check(f"overshoot: {{max: {limit} %}}")
        for limit in (15, 20, 24, 30, 45, 90, 200):
            text += step_check(f"settling_time: {{max: {limit} ms, band: 5 %}}")
        for limit in (0.1, 0.3, 0.5, 0.7, 1, 3):
            text += step_check(f"steady_state_error: {{min: -{limit} rpm, max: {limit} rpm}}")
        for ignore in (0.5, 1.5, 3, 8, 15, 30, 100):
            text += within_check(ignore)
    for every in (2, 5, 10, 15, 25, 50, 100, 190):
        text += FAULT.format(name=f"FLT-{every}", every=1 if fine else every)
        for limit in (3, 8, 12, 20, 30, 60, 120, 250, 400):
            text += fault_check(f"detection_time: {{max: {limit} ms}}")
            text += fault_check(f"torque_off_time: {{max: {limit} ms}}")
        text += fault_check("code_right: {is: yes}, stays_latched: {is: yes}, "
                            "reset_clears: {is: yes}")
    for every in (2, 10, 40, 120, 200):
        text += ANGLE.format(name=f"ANG-{every}", every=2 if fine else every)
        for limit in (0.05, 0.2, 0.6, 1, 2, 5):
            text += angle_check(f"mean_error: {{min: -{limit} deg, max: {limit} deg}}")
            text += frame_check(limit)
        for limit in (0.3, 1, 3, 6):
            text += angle_check(f"worst_error: {{max: {limit} deg}}, spread: {{max: {limit} deg}}")
    return text
