/* SPDX-License-Identifier: Apache-2.0 */
/*
 * The signals of the modelled bench, one row each; signals.c includes it twice.
 * SHOWN(name, device, dimension, how it is held, member of struct model, text)
 * WRITTEN(name, what a write does, device, dimension, least, most, how, member, text)
 * RELAY(name, relay, text), TEXT(name, member, text)
 */
/* clang-format off */
SHOWN("controller.speed", MODEL_CONTROLLER, DIM_SPEED_MECH, HOLDS_DOUBLE, image.speed_rad_s,
      "by its encoder")
SHOWN("controller.dc_voltage", MODEL_CONTROLLER, DIM_VOLTAGE, HOLDS_DOUBLE, image.dc_voltage_v,
      "of its DC link")
SHOWN("controller.current_d", MODEL_CONTROLLER, DIM_CURRENT_AMPLITUDE, HOLDS_DOUBLE,
      image.current_d_a,
      "in the frame that it believes")
SHOWN("controller.current_q", MODEL_CONTROLLER, DIM_CURRENT_AMPLITUDE, HOLDS_DOUBLE,
      image.current_q_a,
      "in the frame that it believes")
SHOWN("controller.torque", MODEL_CONTROLLER, DIM_TORQUE, HOLDS_DOUBLE, image.torque_nm,
      "estimate from these currents")
SHOWN("controller.winding_temperature", MODEL_CONTROLLER, DIM_TEMPERATURE, HOLDS_DOUBLE,
      image.temperature_c,
      "by its sensor")
SHOWN("controller.life", MODEL_CONTROLLER, DIM_NUMBER, HOLDS_LIFE, image.life,
      "milliseconds, modulo 65536, of the register image")
SHOWN("controller.fault_code", MODEL_CONTROLLER, DIM_NUMBER, HOLDS_INT, image.fault_code,
      "0 none, 1 overcurrent, 2 overvoltage, 3 encoder loss, 4 overtemperature, 5 undervoltage, "
      "6 phase loss, 7 safe torque off channels differ, 9 link watchdog")
SHOWN("controller.running", MODEL_CONTROLLER, DIM_NUMBER, HOLDS_BOOL, image.running,
      "1: enabled and controlling")
SHOWN("controller.ready", MODEL_CONTROLLER, DIM_NUMBER, HOLDS_BOOL, image.ready,
      "1: no fault, may be enabled or is")
SHOWN("controller.state", MODEL_CONTROLLER, DIM_NUMBER, HOLDS_INT, image.state,
      "0 starting, 1 ready, 2 running, 3 fault, 4 inhibited")
SHOWN("controller.torque_off_inputs", MODEL_CONTROLLER, DIM_NUMBER, HOLDS_INT,
      image.torque_off_inputs, "bit 0: channel A of safe torque off is open, bit 1: channel B")
SHOWN("controller.rotor_counts", MODEL_CONTROLLER, DIM_NUMBER, HOLDS_INT, image.rotor_counts,
      "encoder counts since index, modulo 4 times the lines")
SHOWN("controller.rotor_position", MODEL_CONTROLLER, DIM_ANGLE_MECH, HOLDS_DOUBLE,
      image.position_rad,
      "turned since it was enabled last, by its encoder; begins with the angle since the index")
SHOWN("controller.current_d_command", MODEL_CONTROLLER, DIM_CURRENT_AMPLITUDE, HOLDS_DOUBLE,
      image.current_d_command_a, "what its current loop is told")
SHOWN("controller.current_q_command", MODEL_CONTROLLER, DIM_CURRENT_AMPLITUDE, HOLDS_DOUBLE,
      image.current_q_command_a, "what its current loop is told")
SHOWN("controller.voltage_d_command", MODEL_CONTROLLER, DIM_VOLTAGE_AMPLITUDE, HOLDS_DOUBLE,
      image.voltage_d_v, "behind the voltage limit")
SHOWN("controller.voltage_q_command", MODEL_CONTROLLER, DIM_VOLTAGE_AMPLITUDE, HOLDS_DOUBLE,
      image.voltage_q_v, "behind the voltage limit")
SHOWN("controller.voltage_alpha_command", MODEL_CONTROLLER, DIM_VOLTAGE, HOLDS_DOUBLE,
      image.voltage_alpha_v, "along phase a, of the same instant as the duties")
SHOWN("controller.voltage_beta_command", MODEL_CONTROLLER, DIM_VOLTAGE, HOLDS_DOUBLE,
      image.voltage_beta_v, "across phase a, of the same instant as the duties")
SHOWN("controller.duty_a", MODEL_CONTROLLER, DIM_NUMBER, HOLDS_DOUBLE, image.duty[0],
      "0 to 1, upper switch")
SHOWN("controller.duty_b", MODEL_CONTROLLER, DIM_NUMBER, HOLDS_DOUBLE, image.duty[1],
      "0 to 1, upper switch")
SHOWN("controller.duty_c", MODEL_CONTROLLER, DIM_NUMBER, HOLDS_DOUBLE, image.duty[2],
      "0 to 1, upper switch")
TEXT("controller.firmware", firmware, "version")
TEXT("controller.serial_number", serial_number, "serial number")
WRITTEN("controller.speed_command", WRITE_SPEED, MODEL_CONTROLLER, DIM_SPEED_MECH, -1e5, 1e5, HOLDS_DOUBLE,
        controller.speed_command_rad_s, "refused beyond the parameter speed_limit")
WRITTEN("controller.control", WRITE_CONTROL, MODEL_CONTROLLER, DIM_NUMBER, 0, 3, HOLDS_INT, controller.control,
        "bit 0 enable, bit 1 reset")
WRITTEN("controller.watchdog_time", WRITE_WATCHDOG, MODEL_CONTROLLER, DIM_TIME, 0, 10, HOLDS_NS, controller.watchdog_ns,
        "silence that trips while enabled; 0: off")
SHOWN("load.torque", MODEL_LOAD, DIM_TORQUE, HOLDS_DOUBLE, load.shown_torque_nm,
      "on the shaft; positive brakes the positive direction")
SHOWN("load.fault_code", MODEL_LOAD, DIM_NUMBER, HOLDS_INT, load.shown_fault_code,
      "0 none, 9 link watchdog")
SHOWN("load.life", MODEL_LOAD, DIM_NUMBER, HOLDS_LIFE, load.life, "milliseconds, modulo 65536")
WRITTEN("load.torque_command", WRITE_LOAD_TORQUE, MODEL_LOAD, DIM_TORQUE, -1e5, 1e5, HOLDS_DOUBLE, load.command_nm,
        "refused beyond 1.5 times the motor's rated torque")
WRITTEN("load.control", WRITE_LOAD_CONTROL, MODEL_LOAD, DIM_NUMBER, 0, 3, HOLDS_INT, load.control,
        "bit 0 enable, bit 1 reset")
WRITTEN("load.watchdog_time", WRITE_LOAD_WATCHDOG, MODEL_LOAD, DIM_TIME, 0, 10, HOLDS_NS, load.watchdog_ns,
        "silence that trips while enabled; 0: off")
SHOWN("shaft.speed", MODEL_TRANSDUCER, DIM_SPEED_MECH, HOLDS_DOUBLE,
      transducer.shown_speed_rad_s, "by the transducer's own wheel")
SHOWN("shaft.torque", MODEL_TRANSDUCER, DIM_TORQUE, HOLDS_DOUBLE, transducer.shown_torque_nm,
      "positive when the motor under test drives the positive direction")
SHOWN("shaft.life", MODEL_TRANSDUCER, DIM_NUMBER, HOLDS_LIFE, transducer.life,
      "milliseconds, modulo 65536")
SHOWN("analyser.current_a", MODEL_ANALYSER, DIM_CURRENT, HOLDS_DOUBLE, analyser.current_a[0],
      "into the motor")
SHOWN("analyser.current_b", MODEL_ANALYSER, DIM_CURRENT, HOLDS_DOUBLE, analyser.current_a[1],
      "into the motor")
SHOWN("analyser.current_c", MODEL_ANALYSER, DIM_CURRENT, HOLDS_DOUBLE, analyser.current_a[2],
      "into the motor")
SHOWN("analyser.rotor_angle", MODEL_ANALYSER, DIM_ANGLE_ELEC, HOLDS_DOUBLE,
      analyser.angle_elec_rad, "magnet flux from phase a, [0, 2 pi), latched with the currents")
SHOWN("analyser.dc_voltage", MODEL_ANALYSER, DIM_VOLTAGE, HOLDS_DOUBLE, analyser.dc_voltage_v,
      "of the DC link")
SHOWN("analyser.life", MODEL_ANALYSER, DIM_NUMBER, HOLDS_LIFE, analyser.life,
      "milliseconds, modulo 65536")
RELAY("fault_box.encoder_open", RELAY_ENCODER_OPEN, "1: the encoder's cable is open")
RELAY("fault_box.hot_sensor", RELAY_HOT_SENSOR, "1: the winding's sensor is 20 K above the limit")
RELAY("fault_box.supply_surge", RELAY_SUPPLY_SURGE, "1: the supply has 1.4 times its voltage")
RELAY("fault_box.current_surge", RELAY_CURRENT_SURGE,
      "1: a test winding feeds the overcurrent comparator with twice its limit")
RELAY("fault_box.supply_sag", RELAY_SUPPLY_SAG, "1: the supply has 0.6 times its voltage")
RELAY("fault_box.phase_open", RELAY_PHASE_OPEN, "1: the wire of motor phase a is open")
RELAY("fault_box.sto_a", RELAY_STO_A, "1: channel A of the safe torque off input is open")
RELAY("fault_box.sto_b", RELAY_STO_B, "1: channel B of the safe torque off input is open")
/* clang-format on */
