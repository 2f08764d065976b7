"""The mistakes one can make in a configuration, each with what the refusal says."""

from __future__ import annotations

from typing import NamedTuple

from tests.support.config_texts import BASE

END = "    period_s: 0.01\n"  # what is added to the loop stands from line 22 on


class Mistake(NamedTuple):
    """`old` in BASE becomes `new`; loading says `says`, after the file's name."""

    old: str
    new: str
    says: str
    seen: bool = True  # by a JSON Schema too; not: what only shows when names and numbers are compared

    @property
    def text(self) -> str:
        assert BASE.count(self.old) == 1, f"{self.old!r} does not stand exactly once in the base"
        return BASE.replace(self.old, self.new)


def in_loop(line: str, says: str, *, seen: bool = True) -> Mistake:
    """A mistake in a line that is added to the loop."""
    return Mistake(END, f"{END}    {line}\n", says, seen)


DRIVE = "serial: {port: /dev/ttyS9}"
VOLTS = "volts: {column: 1, unit: V, limits: [-24, 24]}"
SPEED = "speed: {column: 2, unit: rad/s}"
TEMP = "temp: {path: temp}"
PERIOD = "period_s: 0.01"

YAML_ITSELF = [
    Mistake(PERIOD, f"period_s: {'9' * 5000}", "21: loops.belt.period_s: found the number 9999"),
    Mistake("  belt:", "   belt: [", "not valid YAML: "),
    Mistake("node: n1", "node: n1\nnode: n2", "2: node: this key stands already in line 1; expected it once"),
    Mistake(SPEED, f"{VOLTS}\n      {VOLTS}", "10: sources.drive.signals.volts: this key stands already in line 9"),
    Mistake("node: n1", "node: !!python/object:os.system {}", "1: node: a tag ('!…') stands here; remove it"),
    Mistake("node: n1", "node: !!str n1", "1: node: a tag ('!…') stands here"),
    Mistake("decode: csv", "no: csv", "6: sources.drive: YAML does not read the key no as text; quote it: 'no'"),
    Mistake("  belt:", "  on:", "18: loops: YAML does not read the key on as text; quote it: 'on'"),
    Mistake("  belt:", "  7:", "18: loops: YAML does not read the key 7 as text; quote it: '7'"),
    Mistake("  belt:", "  [a]:", "18: loops: a list, a mapping, an alias or a tag stands as a key; expected a word"),
    Mistake("node: n1", "node: *n", "1: node: no anchor '&n' stands above; expected a value, not an alias"),
    Mistake("node: n1", "node: &n [*n]", "1: node[0]: no anchor '&n' stands above"),
    Mistake(PERIOD, f"{PERIOD}\n--- {{}}", "22: a second document begins here; expected one configuration in a file"),
    Mistake("node: n1", "node: \x07", "1: a control character; remove it"),
    Mistake("node: n1", 'node: "\\U99999999"', "1: not valid YAML: a number beyond every range"),
    Mistake("node: n1", "node: n1\n\tx: 1", "2: not valid YAML: found character '\\t'"),
    Mistake("[drive.volts]", "[" * 30, "19: more than 20 levels of nesting; check brackets and indentation"),
    Mistake("[drive.volts]", f"[{'a, ' * 20000}]", "19: loops.belt.inputs[19965]: more than 20000 values"),
]

WHOLE = [
    Mistake("node: n1\n", "", "1: node: missing; expected a name for this computer"),
    Mistake("loops:", "lops:", "17: lops: unknown key; expected one of node, state_dir, broker, sources, loops, "),
    Mistake("loops:", "lops:", "(nearest valid name 'loops')"),
    Mistake("node: n1", "node: no", "1: node: found no, which YAML reads as a truth value; expected text; quote it:"),
    Mistake("node: n1", "node: 12", "1: node: found the number 12; expected text; quote it: '12'"),
    Mistake("node: n1", "node: _n1", "1: node: '_n1' is no name; expected letters (a-z), digits, '-' and '_'"),
    Mistake("node: n1", "node: a/b", "1: node: 'a/b' is no name"),
    Mistake("node: n1", "node: ''", "1: node: found the text ''; expected text"),
    Mistake("  belt:", "  belt/+:", "18: loops.belt/+: 'belt/+' is no name"),
    Mistake("  drive:", "  '#':", "4: sources.#: '#' is no name"),
    Mistake("      temp:", "      _temp:", "16: sources.hall.signals._temp: '_temp' is no name"),
    Mistake(
        "node: n1", 'node: n1\nstate_dir: "a\\nb"', "2: state_dir: found the text 'a\\nb'; expected text", seen=False
    ),
    Mistake("node: n1", "node: n1\npublish: {every_s: 0}", "2: publish.every_s: found the number 0; expected a"),
    Mistake("node: n1", "node: n1\nrecord: {keep: 1}", "(nearest valid name 'keep_mb')"),
    Mistake("node: n1", "node: n1\nrecord: {keep_mb: -1}", "2: record.keep_mb: found the number -1; expected a"),
    Mistake("node: n1", "node: n1\npage: {port: 0}", "2: page.port: found the number 0; expected a whole number from"),
    Mistake("node: n1", "node: n1\ncommands: {mqtt: 1}", "2: commands.mqtt: found the number 1; expected true or"),
    Mistake("node: n1", "node: n1\npage: []", "2: page: found a list; expected a mapping: the keys listen, port"),
]

BROKER = [
    Mistake(
        "broker: {host: localhost}\n",
        "",
        "11: sources.hall.mqtt: the file names no broker; expected a section",
        seen=False,
    ),
    Mistake("{host: localhost}", "{hosts: a}", "2: broker.hosts: unknown key; expected one of host, port, prefix"),
    Mistake("{host: localhost}", "{port: 70000}", "2: broker.port: found the number 70000; expected a whole number"),
    Mistake("{host: localhost}", "{prefix: a/+}", "2: broker.prefix: 'a/+' holds a wildcard"),
    Mistake(
        "{host: localhost}", "{prefix: /a}", "2: broker.prefix: '/a' begins with '$' or has an empty level", seen=False
    ),
    Mistake("{host: localhost}", "{password_file: a}", "2: broker: found password_file without username; expected"),
    Mistake("{host: localhost}", "{tls: {key_file: a}}", "2: broker.tls: found one of cert_file and key_file;"),
    Mistake("{host: localhost}", "", "2: broker: found nothing; expected a mapping"),
]

SOURCES = [
    Mistake(DRIVE, "qos: 1", "5: sources.drive.qos: unknown key; expected one of serial, mqtt, decode"),
    Mistake(f"    {DRIVE}\n", "", "4: sources.drive: found both serial and mqtt, or neither; expected exactly one of"),
    Mistake(DRIVE, DRIVE + "\n    mqtt: {topic: a}", "4: sources.drive: found both serial and mqtt, or neither"),
    Mistake("{port: /dev/ttyS9}", "{baud: 9600}", "5: sources.drive.serial.port: missing; expected text"),
    Mistake(
        "ttyS9}",
        "ttyS9, baud: 9600.0}",
        "5: sources.drive.serial.baud: found the number 9600.0; expected a",
        seen=False,
    ),
    Mistake(
        "ttyS9}",
        "ttyS9, baud: 1_000}",
        "5: sources.drive.serial.baud: found the text '1_000'; expected a whole",
        seen=False,
    ),
    Mistake("ttyS9}", "ttyS9, parity: evn}", "expected one of none, even, odd (nearest valid name 'even')"),
    Mistake("ttyS9}", "ttyS9, stop_bits: 3}", "5: sources.drive.serial.stop_bits: found the number 3; expected one"),
    Mistake("decode: csv", "decode: cvs", "6: sources.drive.decode: found the text 'cvs'; expected one of csv, json,"),
    Mistake("unit: ms", "unit: min", "7: sources.drive.time.unit: found the text 'min'; expected one of s, ms, us, ns"),
    Mistake("{column: 0, ", "{path: t, ", "7: sources.drive.time.path: does not belong to decode: csv; use 'column'"),
    Mistake("decode: json", "decode: json\n    checksum: xor8", "14: sources.hall.checksum: MQTT guards its payloads"),
    Mistake("decode: json", "decode: json\n    time: {column: 1}", "14: sources.hall.time.column: does not belong to"),
    Mistake(
        '"plant/hall/#"',
        '"plant/#/hall"',
        "12: sources.hall.mqtt.topic: 'plant/#/hall' is no topic filter;",
        seen=False,
    ),
    Mistake('"plant/hall/#"', '"plant/h+"', "12: sources.hall.mqtt.topic: 'plant/h+' is no topic filter", seen=False),
    Mistake('hall/#"}', 'hall/#", qos: 3}', "12: sources.hall.mqtt.qos: found the number 3; expected one of 0, 1, 2"),
    Mistake(
        '    mqtt: {topic: "plant/hall/#"}',
        "    serial: {port: /dev/ttyS9}",
        "15: sources.hall.signals.valve.topic: a serial source has no topics; remove it",
    ),
    Mistake(
        BASE[BASE.index("  hall:") : BASE.index("loops:")],
        "  copy:\n    serial: {port: /dev/ttyS9}\n    decode: plain\n    signals: {a: {}}\n",
        "11: sources.copy: source 'drive' reads this serial port already; expected a port of its own",
        seen=False,
    ),
]

SIGNALS = [
    Mistake(VOLTS, "volts: {unit: V}", "9: sources.drive.signals.volts.column: missing; expected a whole number from"),
    Mistake(VOLTS, "volts: {column: -1}", "9: sources.drive.signals.volts.column: found the number -1; expected a"),
    Mistake(VOLTS, "volts: {column: true}", "9: sources.drive.signals.volts.column: found true, which YAML reads as a"),
    Mistake(VOLTS, "volts: {path: a}", "9: sources.drive.signals.volts.path: does not belong to decode: csv; use"),
    Mistake(VOLTS, "volts: {column: 1, topic: a}", "9: sources.drive.signals.volts.topic: a serial source has no"),
    Mistake(
        "[-24, 24]",
        "[24, -24]",
        "9: sources.drive.signals.volts.limits: found [24, -24]; expected two numbers,",
        seen=False,
    ),
    Mistake("[-24, 24]", "[1, 2, 3]", "9: sources.drive.signals.volts.limits: found 3 values; expected two numbers"),
    Mistake("[-24, 24]", "24", "9: sources.drive.signals.volts.limits: found the number 24; expected two numbers"),
    Mistake("[-24, 24]", "[-24, .inf]", "9: sources.drive.signals.volts.limits[1]: found the number .inf; expected a"),
    Mistake("unit: rad/s", "resolution: 0", "10: sources.drive.signals.speed.resolution: found the number 0;"),
    Mistake(
        "unit: rad/s",
        "scale: {raw: [5, 5], value: [0, 1]}",
        "10: sources.drive.signals.speed.scale.raw: found [5, 5]; expected two numbers that differ: [a, b]",
        seen=False,
    ),
    Mistake("unit: rad/s", "scale: {raw: [0, 5]}", "10: sources.drive.signals.speed.scale.value: missing; expected"),
    Mistake(TEMP, "temp: {}", "16: sources.hall.signals.temp.path: missing; expected text"),
    Mistake(TEMP, "temp: {path: 5}", "16: sources.hall.signals.temp.path: found the number 5; expected text; quote"),
    Mistake(
        TEMP,
        "temp: {path: a, topic: site/a}",
        "does not receive 'site/a'; expected a topic that 'plant/hall/#'",
        seen=False,
    ),
    Mistake(TEMP, "temp: {path: a, topic: plant/+}", "16: sources.hall.signals.temp.topic: 'plant/+' holds a wildcard"),
    Mistake(TEMP, "temp: {path: a, quality: {path: b}}", "16: sources.hall.signals.temp.quality.good: missing;"),
    Mistake(TEMP, "temp: {path: a, quality: {good: true}}", "16: sources.hall.signals.temp.quality.path: missing"),
    Mistake(TEMP, "temp: {path: a, quality: {path: b, good: []}}", "16: sources.hall.signals.temp.quality.good:"),
    Mistake("decode: json", "decode: plain", "15: sources.hall.signals.valve.path: does not belong to decode: plain;"),
    Mistake(
        BASE[BASE.index("    decode: json") : BASE.index("loops:")],
        "    decode: plain\n    signals: {a: {topic: plant/hall/a}, b: {}}\n",
        "14: sources.hall.signals.b: several signals and no topic; expected a topic for each",
        seen=False,
    ),
    Mistake(
        BASE[BASE.index("    decode: json") : BASE.index("loops:")],
        "    decode: plain\n    signals: {a: {topic: plant/hall/a}, b: {topic: plant/hall/a}}\n",
        "14: sources.hall.signals.b: its topic feeds 'a' already; expected a topic of its own",
        seen=False,
    ),
    Mistake(
        BASE[BASE.index("    decode: csv") : BASE.index("  hall:")],
        "    decode: plain\n    signals: {volts: {}, speed: {}}\n",
        "7: sources.drive.signals: found 2 signals; expected one, a plain line is one number (several: decode: csv)",
        seen=False,
    ),
    Mistake(
        BASE[BASE.index("    decode: csv") : BASE.index("  hall:")],
        "    decode: plain\n    time: {}\n    signals: {volts: {}}\n",
        "7: sources.drive.time: a plain payload carries no time; remove it, the arrival time counts",
    ),
    Mistake(
        BASE[BASE.index("    decode: csv") : BASE.index("  hall:")],
        "    decode: senml\n    time: {}\n    signals: {volts: {name: a}}\n",
        "7: sources.drive.time: a SenML record carries its own time; remove it",
    ),
    Mistake(
        BASE[BASE.index("    decode: csv") : BASE.index("  hall:")],
        "    decode: plain\n    signals: {volts: {quality: {good: 1}}}\n",
        "7: sources.drive.signals.volts.quality: a plain payload carries no quality; remove it",
    ),
    Mistake(BASE[BASE.index("    signals:\n      valve") : BASE.index("loops:")], "    signals: {}\n", "at least one"),
]

LOOPS = [
    Mistake("    output: drive.speed\n", "", "18: loops.belt.output: missing; expected a signal as source.signal"),
    Mistake(PERIOD, "memory_s: 1", "18: loops.belt.period_s: missing; expected a number of seconds of at least 1e-06"),
    Mistake(
        "[drive.volts]",
        "[drive.voltz]",
        "19: loops.belt.inputs[0]: no such signal drive.voltz; expected one of",
        seen=False,
    ),
    Mistake("[drive.volts]", "[zz]", "no such signal zz; expected one of drive.volts, drive.speed, hall.valve,"),
    Mistake("[drive.volts]", "drive.volts", "19: loops.belt.inputs: found the text 'drive.volts'; expected a list of"),
    Mistake("[drive.volts]", "[]", "19: loops.belt.inputs: found an empty list; expected a list of signals"),
    Mistake(
        "output: drive.speed",
        "output: drive.volts",
        "20: loops.belt.output: drive.volts is an input as well;",
        seen=False,
    ),
    Mistake(
        "output: drive.speed",
        "output: hall.temp",
        "18: loops.belt: source 'drive' has times in its payload and source 'hall' has not; expected one time base",
        seen=False,
    ),
    Mistake(PERIOD, "period_s: 0", "21: loops.belt.period_s: found the number 0; expected a number of seconds of at"),
    Mistake(PERIOD, "period_s: -1.5", "21: loops.belt.period_s: found the number -1.5; expected a number of seconds"),
    Mistake(PERIOD, "period_s: 1e-3", "21: loops.belt.period_s: found the text '1e-3'; expected"),
    Mistake(PERIOD, "period_s: 1e-3", " (write 1.0e-3)"),
    Mistake(PERIOD, "period_s: 1e3", " (write 1.0e+3)"),
    Mistake(PERIOD, "period_s: 1.5e3", " (write 1.5e+3)"),
    Mistake(PERIOD, "period_s: '0.01'", "21: loops.belt.period_s: found the text '0.01'; expected a number of seconds"),
    Mistake(
        PERIOD,
        "period_s: 017",
        "21: loops.belt.period_s: found the text '017'; expected a number of seconds",
        seen=False,
    ),
    Mistake(
        PERIOD,
        "period_s: 1:30",
        "21: loops.belt.period_s: found the text '1:30'; expected a number of seconds",
        seen=False,
    ),
    Mistake(PERIOD, "period_s: yes", "21: loops.belt.period_s: found yes, which YAML reads as a truth value;"),
    Mistake(PERIOD, "period_s: .nan", "21: loops.belt.period_s: found the number .nan; expected a number", seen=False),
    Mistake(PERIOD, "period_s: -.inf", "21: loops.belt.period_s: found the number -.inf; expected a number"),
    Mistake(PERIOD, "period_s: 1.0e+400", "21: loops.belt.period_s: found the number 1.0e+400; expected a number"),
    in_loop("memory: 60", "22: loops.belt.memory: unknown key; expected one of inputs, output, period_s"),
    in_loop("memmory_s: 60", "(nearest valid name 'memory_s')"),
    in_loop(
        "memory_s: 0.001",
        "22: loops.belt.memory_s: found the number 0.001; expected a number of seconds of at",
        seen=False,
    ),
    in_loop("stale_after_s: 0", "22: loops.belt.stale_after_s: found the number 0; expected a number of seconds of"),
    in_loop("model: output_error", "22: loops.belt.model: found the text 'output_error'; expected a mapping: the keys"),
    in_loop("model: {structure: output}", "expected one of output_error, equation_error (nearest valid name"),
    in_loop("model: {order: 3}", "22: loops.belt.model.order: found the number 3; expected one of 1, 2"),
    in_loop("model: {dead_time_s: -1}", "22: loops.belt.model.dead_time_s: found the number -1; expected a number of"),
    in_loop(
        "model: {dead_time_s: [2, 1]}",
        "22: loops.belt.model.dead_time_s: found [2, 1]; expected two numbers,",
        seen=False,
    ),
    in_loop(
        "model: {dead_time_s: [1, 11.1]}",
        "22: loops.belt.model.dead_time_s: found a range of 1010 periods; expected at most 1000: narrow it",
        seen=False,
    ),
    in_loop(
        "model: {dead_time_s: 101}",
        "22: loops.belt.model.dead_time_s: found a dead time of 10100 periods; expected at most 10000: take",
        seen=False,
    ),
    in_loop("model: {dead_time_s: [-1, 1]}", "22: loops.belt.model.dead_time_s: found -1 s; expected dead times of"),
    in_loop("baseline: {after_s: -1}", "22: loops.belt.baseline.after_s: found the number -1; expected a number of"),
    in_loop("tolerance: {gain: 5}", "(nearest valid name 'gain_pct')"),
    in_loop("tolerance: {gain_pct: 0}", "22: loops.belt.tolerance.gain_pct: found the number 0; expected a percentage"),
    in_loop("alarm_budget: {false_alarms: 0}", "22: loops.belt.alarm_budget.false_alarms: found the number 0;"),
    in_loop("alarms: {plant_drifts: {}}", "22: loops.belt.alarms.plant_drifts: no such alarm; expected one of"),
    in_loop("alarms: {clock: {priority: hi}}", "expected one of high, medium, low (nearest valid name 'high')"),
    in_loop("alarms: {plant_shift: {on_delay_s: 1}}", "22: loops.belt.alarms.plant_shift: plant_shift has no on-delay"),
    in_loop("alarms: [clock]", "22: loops.belt.alarms: found a list; expected a mapping"),
    in_loop("controller: {ti_s: 1}", "22: loops.belt.controller.kp: missing; expected a number"),
    in_loop("controller: {kp: 1, ti_s: 0}", "22: loops.belt.controller.ti_s: found the number 0; expected a number"),
    in_loop("controller: {kp: 1, action: revers}", "(nearest valid name 'reverse')"),
    in_loop("active_when: {signal: drive.volts}", "22: loops.belt.active_when: found no test; expected exactly one"),
    in_loop("active_when: {signal: drive.volts, above: 1, below: 2}", "22: loops.belt.active_when: found above and"),
    in_loop("active_when: {above: 1}", "22: loops.belt.active_when.signal: missing; expected a signal as"),
    in_loop(
        "active_when: {signal: drive.volt, above: 1}",
        "(nearest valid name 'drive.volts')",
        seen=False,
    ),
    in_loop("active_when: {all: []}", "22: loops.belt.active_when.all: found an empty list; expected a list of"),
    in_loop("active_when: {all: [{signal: drive.volts, settle_s: 1}]}", "22: loops.belt.active_when.all[0].settle_s:"),
    in_loop("active_when: {all: [], above: 1}", "22: loops.belt.active_when.above: unknown key; expected one of all,"),
    in_loop("active_when: {signal: drive.volts, above: true}", "22: loops.belt.active_when.above: found true, which"),
    in_loop(
        "active_when: {signal: hall.temp, above: 1}",
        "18: loops.belt: source 'drive' has times in its payload",
        seen=False,
    ),
]

NOT_YET = [
    in_loop("model: {structure: physical}", "22: loops.belt.model.structure: physical is not in this version; use"),
    in_loop("model: {balance: {}}", "22: loops.belt.model.balance: a physical balance is not in this version"),
    in_loop("model: {filter_s: 1}", "22: loops.belt.model.filter_s: the filter of a physical balance is not in this"),
    in_loop("model: {integrating: true}", "22: loops.belt.model.integrating: integrating: true is not in this version"),
    in_loop("operating_point: {}", "22: loops.belt.operating_point: a baseline per region is not in this version"),
    in_loop(
        "baseline: {automatic: false}",
        "22: loops.belt.baseline.automatic: automatic: false is not in this version; let it be learnt",
        seen=False,
    ),
    in_loop("baseline: {known: {gain: 2}}", "22: loops.belt.baseline.known: a known baseline is not in this version"),
    Mistake("[drive.volts]", "[drive.volts, drive.volts]", "19: loops.belt.inputs: found one signal twice", seen=False),
]

MISTAKES = [*YAML_ITSELF, *WHOLE, *BROKER, *SOURCES, *SIGNALS, *LOOPS, *NOT_YET]
