"""The loop file: every key of it read, every fault of it told, with file, line, and what to do."""

import datetime
import math
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from auditor.errors import LoopFileError, Problem
from auditor.loop import ControllerSettings, Limits, Loop
from auditor.loopfile import controller_in_words, read_loop
from auditor.loopfile.durations import JOULES, WATTS, is_duration, quantity, seconds
from auditor.loopfile.gains import Terms, to_ideal
from auditor.loopfile.lines import key_lines, line_of

WHOLE = """\
[loop]
name = "pool-7-level"
period = "60s"
plant = "self-regulating"
description = "level of pool 7"

[log]
path = "pool-7.csv"
layout = "wide"
time = "time"
timezone = "Europe/Lisbon"
ambiguous = "order"
quality = "status"
good = ["Good", 192]
stale = [20]
exclude = [{ from = "2025-03-01T00:00Z", to = "2025-03-02T00:00Z", why = "pump swap" }]

[signals]
measurement = { column = "level", unit = "m", range = [0.0, 4.0], resolution = 0.001 }
setpoint    = { column = "target", unit = "m" }
actuator    = { column = "gate", unit = "%", low = 0, high = 100, max_rate = 5.0 }
disturbances = [ { column = "offtake", unit = "m3/s", scale = 0.001, stored = "on-change" } ]
mode        = { column = "mode", automatic = ["AUTO", 1] }

[controller]
kind = "pid"
gain = 12.0
integral_time = "600s"
derivative_time = "0s"
form = "ideal"
integral = "forward"
gap_integral = "held"
anti_windup = "back-calculation"
tracking_time = "10s"
derivative_on = "error"
derivative_filter = 8
setpoint_weight = 0.5
error_deadband = 0.002

[limits]
low = 1.80
high = 2.30
band = 0.05
max_silence = "30min"
safety = false

[accept]
max_rms_error = 0.03
min_saved_fraction = 0.4
min_hours = 72

[channel]
window = "60s"
max_messages = 10
airtime = "4ms"
duty_cycle = 0.01
other_traffic = 3

[failsafe]
after = "30min"
action = "hold"

[energy]
per_update = "18 mJ"
per_sample = "0.2 mJ"
idle = "60 uW"
battery = "19 Wh"
usable_fraction = 0.8
self_discharge_per_year = 0.02
cold_factor = 0.7

[approval]
change_number = "MOC-17"
limits_owner = "Water board De Linde"

[[rules]]
rule = "send-on-delta"
link = "sensor"
signal = "error"
between = "hold"
delta = [0.005, 0.01, 0.02]
max_silence = "15min"
min_gap = "60s"

[[rules]]
rule = "periodic"
every = { from = 1, to = 100, count = 3 }
"""
SHORT = """\
[loop]
name = "pool"
period = 60

[log]
path = "pool.csv"

[signals]
measurement = { column = "level", unit = "m" }
setpoint = { value = 2.0 }
actuator = { column = "gate", unit = "%" }
"""


def read(folder: Path, text: str) -> Loop:
    (folder / "pool.toml").write_text(text, encoding="utf-8")
    return read_loop(folder / "pool.toml")


def faults(folder: Path, text: str) -> tuple[Problem, ...]:
    with pytest.raises(LoopFileError) as error:
        read(folder, text)
    assert error.value.exit_code == 3
    return error.value.problems


def fault(folder: Path, text: str) -> Problem:
    found = faults(folder, text)
    assert len(found) == 1, found
    return found[0]


def ns(text: str) -> int:
    return int(datetime.datetime.fromisoformat(text).timestamp()) * 10**9


def test_every_key_of_the_loop_file(tmp_path):
    loop = read(tmp_path, WHOLE)
    assert (loop.name, loop.period, loop.plant) == ("pool-7-level", 60.0, "self-regulating")
    assert loop.description == "level of pool 7"
    assert loop.path == tmp_path / "pool.toml"
    log = loop.log
    assert (log.paths, log.folder, log.timezone, log.ambiguous) == (("pool-7.csv",), tmp_path, "Europe/Lisbon", "order")
    assert (log.quality, log.good, log.stale) == ("status", ("Good", 192), (20,))
    (cut,) = log.exclude
    assert (cut.start, cut.end, cut.why) == (ns("2025-03-01T00:00Z"), ns("2025-03-02T00:00Z"), "pump swap")
    signals = loop.signals
    assert (signals.measurement.low, signals.measurement.high, signals.measurement.resolution) == (0.0, 4.0, 0.001)
    assert (signals.setpoint.column, signals.setpoint.value) == ("target", None)
    assert (signals.actuator.low, signals.actuator.high, signals.actuator.max_rate) == (0.0, 100.0, 5.0)
    assert [(d.column, d.scale, d.stored) for d in signals.disturbances] == [("offtake", 0.001, "on-change")]
    assert (signals.mode.column, signals.mode.automatic) == ("mode", ("AUTO", 1))


def test_every_key_of_the_tables_about_the_decision(tmp_path):
    loop = read(tmp_path, WHOLE)
    limits, accept, channel = loop.limits, loop.accept, loop.channel
    assert (limits.low, limits.high, limits.band, limits.max_silence, limits.safety) == (1.8, 2.3, 0.05, 1800.0, False)
    assert (accept.max_rms_error, accept.min_saved_fraction, accept.min_hours) == (0.03, 0.4, 72.0)
    assert (channel.window, channel.max_messages, channel.airtime) == (60.0, 10.0, 0.004)
    assert (channel.duty_cycle, channel.other_traffic) == (0.01, 3.0)
    assert dict(loop.extras["failsafe"]) == {"after_s": 1800.0, "action": "hold"}
    assert dict(loop.extras["energy"]) == {
        "per_update_j": 0.018,
        "per_sample_j": 0.0002,
        "idle_w": 60e-6,
        "battery_j": 68400.0,
        "usable_fraction": 0.8,
        "self_discharge_per_year": 0.02,
        "cold_factor": 0.7,
    }
    assert dict(loop.approval) == {"change_number": "MOC-17", "limits_owner": "Water board De Linde"}


def test_controller_and_rules(tmp_path):
    loop = read(tmp_path, WHOLE)
    c = loop.controller
    assert (c.gain, c.integral_time, c.derivative_time, c.form) == (12.0, 600.0, 0.0, "ideal")
    assert (c.integral, c.gap_integral, c.anti_windup, c.tracking_time) == ("forward", "held", "back-calculation", 10.0)
    assert (c.derivative_on, c.derivative_filter, c.setpoint_weight, c.error_deadband) == ("error", 8.0, 0.5, 0.002)
    first, second = loop.rules
    assert (first.rule, first.link, first.signal, first.between) == ("send-on-delta", "sensor", "error", "hold")
    assert dict(first.settings) == {"delta": (0.005, 0.01, 0.02), "max_silence_s": (900.0,), "min_gap_s": (60.0,)}
    assert (second.link, second.signal, second.between) == (None, None, None)
    assert second.settings["every"] == pytest.approx((1.0, 10.0, 100.0), rel=1e-12)  # rounding of the logarithms


def test_what_is_left_out_has_its_default(tmp_path):
    loop = read(tmp_path, SHORT)
    assert (loop.controller, loop.channel, loop.plant, loop.rules) == (None, None, None, ())
    assert (loop.limits.stated, loop.accept.min_hours, loop.accept.min_saved_fraction) == (False, 48.0, 0.3)
    assert (loop.log.layout, loop.log.time, loop.log.timezone) == ("wide", "time", None)
    assert loop.signals.setpoint.value == 2.0
    assert dict(loop.extras) == {}
    assert isinstance(loop.limits, Limits)


def test_paths_may_be_a_list_and_long_layout_has_tags(tmp_path):
    text = SHORT.replace('path = "pool.csv"', 'path = ["a.csv", "b.csv"]\nlayout = "long"\ntag = "name"\nvalue = "v"')
    log = read(tmp_path, text).log
    assert (log.paths, log.layout, log.tag, log.value) == (("a.csv", "b.csv"), "long", "name", "v")


def test_a_signal_may_have_a_time_column_of_its_own_in_the_wide_layout(tmp_path):
    text = SHORT.replace('"gate", unit', '"gate", time = "t2", unit')
    loop = read(tmp_path, text + '\n[signals.mode]\ncolumn = "m"\nautomatic = [1]\ntime = "t3"\n')
    assert (loop.signals.measurement.time, loop.signals.actuator.time, loop.signals.mode.time) == (None, "t2", "t3")
    with pytest.raises(LoopFileError) as raised:
        read(tmp_path, text.replace('"pool.csv"', '"pool.csv"\nlayout = "long"'))
    (problem,) = raised.value.problems
    assert "signals.actuator.time is for the wide layout only" in problem.what


def test_a_byte_order_mark_and_windows_line_ends_do_no_harm(tmp_path):
    (tmp_path / "pool.toml").write_bytes(b"\xef\xbb\xbf" + SHORT.replace("\n", "\r\n").encode())
    assert read_loop(tmp_path / "pool.toml").name == "pool"


@pytest.mark.parametrize(
    ("written", "expected"),
    [
        ("250ms", 0.25),
        ("60s", 60.0),
        ("15min", 900.0),
        ("2h", 7200.0),
        ("1d", 86400.0),
        ("1.5 h", 5400.0),
        ("1e3 s", 1000.0),
        (7, 7.0),
        (0.5, 0.5),
    ],
)
def test_seconds(written, expected):
    assert seconds(written) == expected


@pytest.mark.parametrize("written", ["5m", "1,5h", "", "h", "10 S", "1h30min", True, None, [1]])
def test_no_duration(written):
    with pytest.raises(ValueError, match="not a number"):
        seconds(written)


@given(st.integers(1, 10**6), st.sampled_from(["ms", "s", "min", "h", "d"]))
def test_durations_of_whole_units_are_exact_to_the_last_bit_of_a_quotient(count, unit):
    size = {"ms": (1, 1000), "s": (1, 1), "min": (60, 1), "h": (3600, 1), "d": (86400, 1)}[unit]
    assert seconds(f"{count}{unit}") == count * size[0] / size[1]
    assert is_duration(f"{count}{unit}")


def test_quantities():
    assert quantity("19 Wh", JOULES) == 68400.0
    assert quantity("60 µW", WATTS) == quantity("60 uW", WATTS) == 60e-6
    assert not is_duration("0.5")


def test_nothing_of_a_file_full_of_faults_is_left_untold(tmp_path):
    text = """\
name = "x"
[loop]
name = "pool/7"
period = "5m"
plnt = "integrating"

[log]
path = ""
timezone = "Europe/Lisbonn"
max_silence = "3min"
delimiter = ","
decimal = ","
skip_rows = "3"
exclude = [
  { from = "2025-03-01T00:00Z", to = "2025-02-01T00:00Z", why = "a" },
  { from = "yesterday", to = "2025-02-01T00:00Z", why = "b" },
]
[signals]
measurement = { colum = "level", unit = 3 }
setpoint = { unit = "m" }
actuator = { column = "gate", low = 100, high = 0 }
[limits]
high = "3"
[[rules]]
delta = "0.5"
"""
    where = [
        "line 1: name",
        "line 3: loop.name",
        "line 4: loop.period",
        "line 5: loop.plnt",
        "line 8: log.path",
        "line 9: log.timezone",
        "line 10: log.max_silence",
        "line 12: log.decimal",
        "line 13: log.skip_rows",
        "line 15: log.exclude no. 1.to",
        "line 16: log.exclude no. 2.from",
        "line 19: signals.measurement.unit",
        "line 19: signals.measurement.colum",
        "line 20: signals.setpoint",
        "line 21: signals.actuator.low",
        "line 23: limits.high",
        "line 24: rules no. 1.rule",
        "line 25: rules no. 1.delta",
    ]
    found = [problem.where.removeprefix(f"{tmp_path / 'pool.toml'}, ") for problem in faults(tmp_path, text)]
    assert found == where


@pytest.mark.parametrize(
    ("old", "new", "where", "do"),
    [
        ("period = 60", 'period = "5m"', "line 3: loop.period", '"min" instead of "m"'),
        ("period = 60", 'period = 60\nplan = "integrating"', "line 4: loop.plan", 'did you mean "plant"'),
        ("period = 60", 'period = 60\nplant = "stable"', "line 4: loop.plant", 'did you mean "unstable"'),
        ("period = 60", "period = 60\nband = 3", "line 4: loop.band", "move it to [limits]"),
        ("period = 60", "period = 0", "line 3: loop.period", "correct"),
        ("period = 60\n", "", "line 1: loop.period", 'add  period = "60s"'),
        ('name = "pool"', 'name = "a/b"', "line 2: loop.name", "letters"),
        ('name = "pool"', "name = 7", "line 2: loop.name", 'put it in quotes: "7"'),
        ("[log]", "[logs]", "line 5: logs", 'did you mean "log"'),
        ('"pool.csv"', '""', "line 6: log.path", "fill it in"),
        ('"pool.csv"', '"pool.csv"\ntimezone = "CET+1"', "line 7: log.timezone", ""),
        ('"pool.csv"', '"pool.csv"\ntime_unit = "msec"', "line 7: log.time_unit", '"ms"'),
        ('"pool.csv"', '"pool.csv"\ntag = "name"', "line 7: log.tag", 'layout = "long"'),
        ('"pool.csv"', '"pool.csv"\ngood = [192]', "line 7: log.good", "add quality"),
        ('"gate", unit', '"gate", tim = "t2", unit', "signals.actuator.tim", 'did you mean "time"'),
        ("{ value = 2.0 }", '{ value = 2.0, time = "t2" }', "signals.setpoint.time", "remove time"),
        ('"pool.csv"', '"pool.csv"\nencoding = "utf-9"', "line 7: log.encoding", ""),
        ("{ value = 2.0 }", '{ value = 2.0, column = "x" }', "signals.setpoint", "constant"),
        ("{ value = 2.0 }", '{ value = 2.0, unit = "cm" }', "signals.setpoint.unit", "scale"),
        ("{ value = 2.0 }", "{ value = 2.0, scale = 2.0 }", "signals.setpoint.scale", "remove scale"),
        ("{ value = 2.0 }", '{ column = "level" }', "signals.setpoint.column", "correct one"),
        ('"gate", unit', '"gate", low = 5, high = 5, unit', "signals.actuator.low", "correct"),
        ('"gate", unit', '"gate", low = 5, range = [1, 9], unit', "signals.actuator.range", "remove one"),
        ('"gate", unit', '"gate", max_rate = "5.0", unit', "signals.actuator.max_rate", "without quotes"),
        ('"gate", unit', '"gate", scale = 0, unit', "signals.actuator.scale", "correct"),
        ('"gate", unit', '"gate", range = 100, unit', "signals.actuator.range", "put it in brackets: [100]"),
        ('"level", unit', '"level", range = [4, 0], unit', "signals.measurement.range", "correct"),
        ('"level", unit', '"level", offset = nan, unit', "signals.measurement.offset", "correct"),
    ],
)
def test_one_fault_one_problem(tmp_path, old, new, where, do):
    assert old in SHORT
    problem = next(p for p in faults(tmp_path, SHORT.replace(old, new)) if where in p.where)
    assert do in problem.do
    # Every problem names the file, and what was expected in its place.
    assert str(tmp_path / "pool.toml") in problem.where
    assert problem.expected


@pytest.mark.parametrize(
    ("more", "where", "what"),
    [
        ("[limits]\nlow = 2.3\nhigh = 1.8", "limits.low", "upside down"),
        ("[limits]\nlow = 1.8\nhigh = 2.3\nband = 0.3", "limits.band", "wider than the limits"),
        ("[limits]\nband = 0", "limits.band", "cannot be used"),
        ("[limits]\nhigh = 1.9", "limits.high", "outside"),
        ("[limits]\nsafety = 1", "limits.safety", "cannot be used"),
        ("[accept]\nmin_saved_fraction = 30", "accept.min_saved_fraction", "cannot be used"),
        ('[channel]\nwindow = "60s"', "channel.max_messages", "missing"),
        ("[channel]\nwindow = 60\nmax_messages = 5\nduty_cycle = 2", "channel.duty_cycle", "cannot be used"),
        ("[channel]\nwindow = 60\nmax_messages = 5\nduty_cycle = 0.1", "channel.duty_cycle", "needs the airtime"),
        ('[failsafe]\nafter = "30min"\naction = "close"', "failsafe.action", "not an action"),
        ('[energy]\nper_update = "18 mW"', "energy.per_update", "not an energy"),
        ('[energy]\nidle = "60 uJ"', "energy.idle", "not a power"),
        ("[approval]\nchange_number = 17", "approval.change_number", "cannot be used"),
        ("[approval]\nowner = 'x'", "approval.owner", "unknown key"),
        ('[rules]\nrule = "periodic"', "rules", "not a list of tables"),
        ('[controller]\nkind = "state-feedback"\nF = [1, 2]', "controller.kind", "not supported in this version"),
        ('[controller]\nkind = "linear"', "controller.kind", "not supported in this version"),
        ('[controller]\nkind = "pif"\ngain = 1\nintegral_time = 9', "controller.kind", "cannot be used"),
        ("[controller]\ngain = 1", "controller.integral_time", "missing"),
        ("[controller]\nintegral_time = 9", "controller.gain", "missing"),
        ("[controller]\ngain = 0\nintegral_time = 9", "controller.gain", "zero"),
        ("[controller]\ngain = 1\nintegral_time = 0", "controller.integral_time", "above zero"),
        ("[controller]\ngain = 1\nintegral_time = 9\nbias = 2", "controller.bias", "no use"),
        ("[controller]\ngain = 1\nintegral_time = 9\nrange = [0, 1]", "controller.range", "no use"),
        ("[controller]\ngain = -1\nintegral_time = 9\naction = 'direct'", "controller.action", "sign"),
        (
            "[controller]\ngain = 1\nintegral_time = 9\nrepeats_per_minute = 2",
            "controller.repeats_per_minute",
            "says what",
        ),
        (
            "[controller]\ngain = 1\nintegral_time = 9\nanti_windup = 'freeze'\ntracking_time = 5",
            "controller.tracking_time",
            "no use",
        ),
        (
            "[controller]\nproportional_band = 50\nrange = [0, 4]\nintegral_time = 9",
            "controller.proportional_band",
            "action",
        ),
        (
            "[controller]\nproportional_band = 50\naction = 'direct'\nintegral_time = 9",
            "controller.proportional_band",
            "measurement range",
        ),
        (
            "[controller]\ngain = 1\nintegral_time = 9\n[[controller.feedforward]]\ncolumn = 'offtake'\ngain = 3",
            "controller.feedforward",
            "not supported in this version",
        ),
    ],
)
def test_one_fault_in_another_table(tmp_path, more, where, what):
    problem = fault(tmp_path, f"{SHORT}\n{more}\n")
    assert where in problem.where
    assert what in problem.what


def test_unsupported_controllers_name_what_is_supported(tmp_path):
    problem = fault(tmp_path, f'{SHORT}[controller]\nkind = "linear"\nnumerator = [1.0]\n')
    assert problem.expected == '"pid"'
    assert "recovered from the log" in problem.do


def test_proportional_band_needs_a_span(tmp_path):
    text = SHORT.replace('unit = "%"', 'unit = "rpm"')
    text += "[controller]\nproportional_band = 50\nrange = [0, 4]\naction = 'direct'\nintegral_time = 9\n"
    assert "span" in fault(tmp_path, text).what


def controller(folder: Path, text: str, actuator: str = 'column = "gate", unit = "%"') -> ControllerSettings:
    body = SHORT.replace('column = "gate", unit = "%"', actuator)
    return read(folder, f"{body}[controller]\n{text}\n").controller


def test_series_becomes_ideal(tmp_path):
    c = controller(tmp_path, 'gain = 2\nintegral_time = "80s"\nderivative_time = "20s"\nform = "series"')
    # K (1 + Td/Ti), Ti + Td, Ti Td / (Ti + Td); the filter keeps its time Td/N = 2 s.
    assert (c.gain, c.integral_time, c.derivative_time, c.form) == (2.5, 100.0, 16.0, "ideal")
    assert c.derivative_time / c.derivative_filter == pytest.approx(2.0, rel=1e-15)  # one rounding
    assert c.setpoint_weight == 0.8


def test_parallel_becomes_ideal(tmp_path):
    c = controller(tmp_path, 'gain = 2\nintegral_time = "50s"\nderivative_time = "20s"\nform = "parallel"')
    # u = 2 e + (1/50) ∫e + 20 de/dt: Ti = 2·50, Td = 20/2.
    assert (c.gain, c.integral_time, c.derivative_time, c.form) == (2.0, 100.0, 10.0, "ideal")
    c = controller(tmp_path, 'gain = 2\nintegral_time = 50\naction = "direct"\nform = "parallel"')
    assert (c.gain, c.integral_time) == (-2.0, 100.0)


@given(
    st.floats(0.1, 10.0),
    st.floats(1.0, 1e3),
    st.floats(0.0, 200.0),
    st.floats(1e-4, 10.0),
    st.sampled_from([1.0, -1.0]),
)
def test_converted_controllers_have_the_same_frequency_response(gain, ti, td, frequency, sign):
    s = 1j * frequency
    terms = Terms(sign * gain, ti, td, 1.0, 10.0)
    responses = {
        "series": sign * gain * (1 + 1 / (ti * s)) * (1 + td * s),
        "parallel": sign * (gain + 1 / (ti * s) + td * s),
        "ideal": sign * gain * (1 + 1 / (ti * s) + td * s),
    }
    for form, response in responses.items():
        t = to_ideal(form, terms)
        ideal = t.gain * (1 + 1 / (t.integral_time * s) + t.derivative_time * s)
        # A few roundings of sums whose terms may cancel to about a thousandth.
        assert abs(ideal - response) <= 1e-11 * abs(response) + 1e-12


@pytest.mark.parametrize("on", ["measurement", "error"])
def test_series_setpoint_weight(on):
    """From the setpoint the proportional gain is K β in series form, plus K Td/Ti where it passes the derivative."""
    terms = to_ideal("series", Terms(2.0, 80.0, 20.0, 0.5, 10.0), on)
    path = 2.0 * 0.5 + (2.0 * 20.0 / 80.0 if on == "error" else 0.0)
    assert terms.gain * terms.setpoint_weight == pytest.approx(path, rel=1e-15)  # one rounding


def test_proportional_band_and_action(tmp_path):
    text = 'proportional_band = 50\nrange = [0.0, 4.0]\naction = "{}"\nrepeats_per_minute = 0.5'
    # 100 % / 50 % · 100 % / 4 m, u rising as the level falls.
    c = controller(tmp_path, text.format("reverse"))
    assert (c.gain, c.integral_time) == (50.0, 120.0)
    assert controller(tmp_path, text.format("direct")).gain == -50.0
    rpm = controller(tmp_path, text.format("reverse"), 'column = "gate", unit = "rpm", low = 300, high = 1500')
    assert rpm.gain == 600.0


def test_limits_of_a_percent_actuator_do_not_change_its_span(tmp_path):
    text = 'proportional_band = 100\nrange = [0, 1]\naction = "reverse"\nintegral_time = 9'
    assert controller(tmp_path, text, 'column = "gate", unit = "%", low = 20, high = 80').gain == 100.0


def test_no_integral_action(tmp_path):
    c = controller(tmp_path, 'gain = 2\nintegral_time = "none"\nbias = 40')
    assert (c.integral_time, c.bias) == (None, 40.0)


def test_controller_in_words(tmp_path):
    read(tmp_path, SHORT)
    assert controller_in_words(tmp_path / "pool.toml") is None
    controller(tmp_path, 'gain = 2\nintegral_time = "80s"\nderivative_time = "20s"\nform = "series"')
    words = controller_in_words(tmp_path / "pool.toml")
    assert "series form: gain 2.000 %/m, integral time 1.33 min, derivative time 20 s" in words
    assert "ideal form: gain 2.500 %/m, integral time 1.67 min, derivative time 16 s" in words
    controller(tmp_path, 'gain = 2\nintegral_time = "none"')
    assert "no integral action" in controller_in_words(tmp_path / "pool.toml")
    controller(tmp_path, 'gain = 2\nintegral_time = 50\nform = "parallel"')
    assert "integral gain 0.02000" in controller_in_words(tmp_path / "pool.toml")


def settings(folder: Path, text: str) -> dict[str, tuple[float, ...]]:
    return dict(read(folder, f'{SHORT}[[rules]]\nrule = "any"\n{text}\n').rules[0].settings)


@pytest.mark.parametrize(
    ("written", "key", "values"),
    [
        ("delta = 3", "delta", (3.0,)),
        ("delta = [1, 2.5]", "delta", (1.0, 2.5)),
        ('max_silence = ["1min", 120]', "max_silence_s", (60.0, 120.0)),
        ("min_gap = 0", "min_gap_s", (0.0,)),
        ('longest = "2h"', "longest_s", (7200.0,)),
        ('max_silence = { from = "1min", to = "4min", count = 2 }', "max_silence_s", (60.0, 240.0)),
        ("max_silence_s = 60", "max_silence_s", (60.0,)),
    ],
)
def test_settings(tmp_path, written, key, values):
    assert settings(tmp_path, written) == {key: values}


@given(st.floats(1e-6, 1.0), st.floats(1.001, 1e6), st.integers(2, 30))
def test_log_spaced_settings(tmp_path_factory, low, ratio, count):
    high = low * ratio
    values = settings(tmp_path_factory.mktemp("loop"), f"delta = {{ from = {low!r}, to = {high!r}, count = {count} }}")
    found = np.array(values["delta"])
    assert (found[0], found[-1], len(found)) == (low, high, count)
    steps = np.diff(np.log(found))
    # The logarithm of each value carries a few roundings of its own size.
    np.testing.assert_allclose(steps, math.log(ratio) / (count - 1), atol=1e-13)


@pytest.mark.parametrize(
    ("written", "where", "do"),
    [
        ('delta = "0.5"', "rules no. 1.delta", "without quotes"),
        ("delta = []", "rules no. 1.delta", "correct"),
        ("delta = [1, 'x']", "rules no. 1.delta", "correct"),
        ("delta = true", "rules no. 1.delta", "correct"),
        ("delta = inf", "rules no. 1.delta", "correct"),
        ("delta = { from = 1, to = 0.1, count = 3 }", "rules no. 1.delta", "write it like"),
        ("delta = { from = 1, to = 2, count = 1 }", "rules no. 1.delta", "write it like"),
        ("delta = { from = 1, to = 2, cuont = 3 }", "rules no. 1.delta.cuont", 'did you mean "count"'),
        ('lnk = "sensor"', "rules no. 1.lnk", 'did you mean "link"'),
        ('link = "both"', "rules no. 1.link", "expected words"),
        ("max_silence = 0", "rules no. 1.max_silence", "correct"),
        ('min_gap = "-5s"', "rules no. 1.min_gap", "correct"),
        ('longest = "2h"\nlongest_s = 5', "rules no. 1.longest_s", "remove one"),
    ],
)
def test_bad_settings(tmp_path, written, where, do):
    problem = fault(tmp_path, f'{SHORT}[[rules]]\nrule = "any"\n{written}\n')
    assert problem.where.endswith(where)
    assert do in problem.do


@pytest.mark.parametrize(
    ("written", "moment"),
    [
        ('"2025-03-01T00:00Z"', "2025-03-01T00:00Z"),
        ('"2025-03-01t00:00:00z"', "2025-03-01T00:00Z"),
        ('"2025-03-01T02:00+02:00"', "2025-03-01T00:00Z"),
        ("2025-03-01T02:00:00+02:00", "2025-03-01T00:00Z"),
        ("2025-03-01", "2025-03-01T00:00+01:00"),
        ('"2025-07-01 12:00"', "2025-07-01T12:00+02:00"),
    ],
)
def test_moments_without_an_offset_are_on_the_logs_own_clock(tmp_path, written, moment):
    more = f'timezone = "Europe/Amsterdam"\nexclude = [{{ from = {written}, to = 2026-01-01T00:00:00Z, why = "x" }}]\n'
    loop = read(tmp_path, SHORT.replace('"pool.csv"\n', f'"pool.csv"\n{more}'))
    assert loop.log.exclude[0].start == ns(moment)


def test_toml_syntax_errors_name_the_line(tmp_path):
    problem = fault(tmp_path, SHORT.replace("period = 60", "period = 60s"))
    assert "line 3" in problem.where
    assert problem.found == "period = 60s"
    problem = fault(tmp_path, SHORT.replace('"pool.csv"', r'"C:\users\log.csv"'))
    assert "line 6" in problem.where
    assert "single quotes" in problem.do


def test_files_that_cannot_be_read(tmp_path):
    (tmp_path / "pool-7.toml").write_text(SHORT)
    with pytest.raises(LoopFileError, match=r'did you mean "pool-7.toml"'):
        read_loop(tmp_path / "pool7.toml")
    with pytest.raises(LoopFileError, match="is a folder"):
        read_loop(tmp_path)
    (tmp_path / "latin.toml").write_bytes(SHORT.replace("pool.csv", "größe.csv").encode("cp1252"))
    with pytest.raises(LoopFileError, match=r"line 6\n.*found: +byte 0xf6"):
        read_loop(tmp_path / "latin.toml")


def test_missing_tables_are_all_named(tmp_path):
    assert [problem.what for problem in faults(tmp_path, "")] == [
        "the table [loop] is missing",
        "the table [log] is missing",
        "the table [signals] is missing",
    ]
    assert "table" in faults(tmp_path, SHORT.replace("[loop]", "[[loop]]"))[0].expected


def test_a_line_marked_fill_in_waits_until_it_is_filled(tmp_path):
    text = SHORT.replace('path = "pool.csv"', 'path = "pool.csv"\ntime = ""  # FILL IN\ntimezone = "UTC"  # FILL IN')
    problem = fault(tmp_path, text)
    assert problem.where.endswith("line 7: log.time")
    assert "filled in by you" in problem.do
    # Without the mark it is the column that has no name.
    assert read(tmp_path, text.replace("  # FILL IN", "")).log.time == ""


def test_faults_between_keys_wait_for_the_keys_themselves(tmp_path):
    text = f'{SHORT}[controller]\ngain = "1"\naction = 3\nintegral_time = "5m"\n'
    where = [problem.where.rpartition(" ")[2] for problem in faults(tmp_path, text)]
    assert where == ["controller.gain", "controller.action", "controller.integral_time"]


ODD = [
    '""',
    "[]",
    "{}",
    "0",
    "-1",
    "true",
    "nan",
    "1e400",
    "[[1]]",
    '["x"]',
    "{ a = 1 }",
    "2025-01-01",
    "07:32:00",
    '"\\u0000"',
]


@pytest.mark.parametrize("row", [n for n, line in enumerate(WHOLE.splitlines()) if "=" in line])
def test_any_odd_value_is_read_or_refused_but_never_breaks_the_reader(tmp_path, row):
    rows = WHOLE.splitlines()
    key = rows[row].partition("=")[0]
    texts = ["\n".join([*rows[:row], f"{key}= {odd}", *rows[row + 1 :]]) for odd in ODD]
    refused = [problem for text in texts for problem in outcome(tmp_path, text)]
    # A table in place of a value fits nowhere, so that something is always refused.
    assert refused
    assert all(problem.what and problem.where and problem.do for problem in refused)


def outcome(folder: Path, text: str) -> tuple[Problem, ...]:
    """The problems of a loop file; anything but a loop and a loop file error comes through."""
    try:
        read(folder, text)
    except LoopFileError as error:
        return error.problems
    return ()


def test_key_lines():
    text = '''a = 1 # [no]
"b c".d = """
[x]
y = 2
"""
[t.u]
v = { w = [1,
  2], x = "}" }
[[t.list]]
k = 1979-05-27 07:32:00
[[t.list]]
k = [{ z = 1 }, { z = 2,
 q = 3 }]
'''
    lines = key_lines(text)
    assert lines[("a",)] == 1
    assert lines[("b c", "d")] == 2
    assert ("x",) not in lines
    assert lines[("t", "u", "v", "w", 1)] == 8
    assert lines[("t", "u", "v", "x")] == 8
    assert lines[("t", "list", 0, "k")] == 10
    assert lines[("t", "list", 1, "k", 1, "q")] == 13
    assert line_of(("t", "list", 1, "k", 1, "nothing"), lines) == 12
    assert line_of(("nothing",), lines) is None


@pytest.mark.parametrize(
    ("line", "do"),
    [
        ("period = 0,3", "use a point: 0.3"),
        ("period = -12,50  # s", "use a point: -12.50"),
        ("period = [1, 0,05]", "use a point: 0.05"),
        ("period = { from = 0,1, to = 1 }", "use a point: 0.1"),
    ],
)
def test_a_decimal_comma_is_recognised(tmp_path, line, do):
    problem = fault(tmp_path, SHORT.replace("period = 60", line))
    assert "decimal comma" in problem.what
    assert problem.do == do


def test_a_comma_that_is_no_decimal_sign_is_not_taken_for_one(tmp_path):
    assert "decimal comma" not in fault(tmp_path, SHORT.replace("period = 60", "period = [1,2")).what


def test_a_loop_file_with_another_name_is_not_offered(tmp_path):
    (tmp_path / "cl_open.toml").write_text(SHORT)
    with pytest.raises(LoopFileError, match="check the path"):
        read_loop(tmp_path / "nope.toml")
