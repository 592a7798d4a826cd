"""A disguised copy: the same answers, and nothing of the original's names; the key gives everything back."""

from __future__ import annotations

import math
import re
import tomllib
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

import auditor as au
from auditor.audit import Audit
from auditor.cli.app import run
from auditor.disguise import Disguised, Key, disguise, key_text, read_key, write_disguised
from auditor.disguise.draw import is_exact
from auditor.disguise.make import differences
from auditor.disguise.toml import table, written
from auditor.errors import LoopFileError, OutputError
from auditor.loop import Loop
from auditor.rules import RULES
from tests.truth import scene, write_log

SAMPLES = Path(__file__).resolve().parent.parent / "sample_logs"

EVERY_RULE = """
[[rules]]
rule = "periodic"
every = [3, 7]

[[rules]]
rule = "send-on-delta"
delta = { from = 0.006, to = 0.02, count = 3 }
max_silence = "90min"
min_gap = "3min"

[[rules]]
rule = "send-on-delta"
link = "actuator"
delta = 1.5

[[rules]]
rule = "level-crossing"
spacing = 0.01
hysteresis = 0.002

[[rules]]
rule = "send-on-area"
area = 9.0

[[rules]]
rule = "error-area"
area = 20.0
delta = 0.03

[[rules]]
rule = "linear-prediction"
delta = 0.01
window = "10min"

[[rules]]
rule = "model-prediction"
delta = 0.01

[[rules]]
rule = "actuator-deadband"
delta = 1.5
"""

ON_THE_LEVEL = """
[[rules]]
rule = "level-crossing"
signal = "measurement"
spacing = 0.01
origin = 1.9
"""


@dataclass(frozen=True)
class Pair:
    """A loop, its copy read back from the files, the key, and both audits."""

    loopfile: Path
    folder: Path
    key: Key
    own: Audit
    copy: Audit


def pair(loopfile: Path, seed: int = 5) -> Pair:
    folder = loopfile.parent / "shared"
    assert run(["disguise", str(loopfile), "--out", str(folder), "--seed", str(seed)]) == 0
    key = read_key(loopfile.parent / f"{loopfile.stem}.shared.key.json")
    own, copy = (au.audit(au.read_loop(path), quick=True) for path in (loopfile, folder / "loop-1.toml"))
    return Pair(loopfile, folder, key, own, copy)


def canal_pool(folder: Path, rows: int = 4000) -> Path:
    """The bundled canal pool, the first `rows` samples, at a few settings."""
    lines = (SAMPLES / "canal-pool.csv").read_text("utf-8").splitlines()
    (folder / "canal-pool.csv").write_text("\n".join(lines[: rows + 1]) + "\n", "utf-8")
    text = (SAMPLES / "canal-pool.toml").read_text("utf-8")
    path = folder / "canal-pool.toml"
    path.write_text(text + '\n[[rules]]\nrule = "send-on-delta"\ndelta = [0.005, 0.01, 0.02]\n', "utf-8")
    return path


@pytest.fixture(scope="module")
def canal(tmp_path_factory: pytest.TempPathFactory) -> Pair:
    return pair(canal_pool(tmp_path_factory.mktemp("canal")))


@pytest.fixture(scope="module")
def synthetic(tmp_path_factory: pytest.TempPathFactory) -> Pair:
    path = write_log(tmp_path_factory.mktemp("synthetic"), scene(n=4000).run(), more=EVERY_RULE + ON_THE_LEVEL)
    return pair(path)


@pytest.fixture(params=["canal", "synthetic"])
def both(request: pytest.FixtureRequest) -> Pair:
    found: Pair = request.getfixturevalue(request.param)
    return found


def test_every_replay_updates_as_often_with_the_same_error_but_for_the_scale(both: Pair) -> None:
    assert len(both.own.replays) == len(both.copy.replays) > 0
    assert {"send-on-delta", "periodic"} <= {r.setting.rule for r in both.own.replays}
    for own, copy in zip(both.own.replays, both.copy.replays, strict=True):
        assert own.setting.rule == copy.setting.rule
        # Exact: a power of two changes no digit of any sum, product or comparison, so no bit may differ.
        np.testing.assert_array_equal(own.members["updates"], copy.members["updates"])
        np.testing.assert_array_equal(own.members["rms_error"], both.key.error(copy.members["rms_error"]))
        for name in ("max_abs_error", "iae_per_hour"):
            assert getattr(own.measures, name) == both.key.error(np.array(getattr(copy.measures, name)))
        assert own.measures.updates == copy.measures.updates
        assert own.measures.rms_error == both.key.error(np.array(copy.measures.rms_error))
        assert own.naive_updates == copy.naive_updates
        assert (own.answerable, own.trust, own.against_periodic) == (copy.answerable, copy.trust, copy.against_periodic)


def test_flags_and_verdict_are_those_of_the_original(both: Pair) -> None:
    assert both.own.verdict.decision == both.copy.verdict.decision
    assert both.own.recommendation.replay == both.copy.recommendation.replay
    told = [[(f.replay, f.start, f.stop, f.cause, f.severity) for f in a.flags] for a in (both.own, both.copy)]
    assert told[0] == told[1]


def test_the_synthetic_pair_asks_every_rule(synthetic: Pair) -> None:
    assert {r.setting.rule for r in synthetic.own.replays} == set(RULES)


def test_the_key_restores_every_value_and_time(both: Pair) -> None:
    own, copy, key = both.own.record, both.copy.record, both.key
    np.testing.assert_array_equal(key.measurement(copy.y), own.y)
    np.testing.assert_array_equal(key.measurement(copy.r), own.r)
    np.testing.assert_array_equal(key.actuator(copy.u), own.u)
    assert key.time(copy.start) == own.start
    assert key.loop == both.own.loop.name
    assert key.columns["measurement"] == both.own.loop.signals.measurement.column


def keys_in(body: object) -> set[str]:
    """Every key of a TOML document."""
    if isinstance(body, list):
        return {key for member in body for key in keys_in(member)}
    if not isinstance(body, dict):
        return set()
    return {*body, *(key for member in body.values() for key in keys_in(member))}


def test_no_word_of_the_loop_file_is_in_the_copy(both: Pair) -> None:
    # Keys are the loop file's own (an unknown one would have been refused), and so are the names of choices.
    keys = keys_in(tomllib.loads((both.folder / "loop-1.toml").read_text("utf-8")))
    choices = ("integrating", "ideal", "forward", "back-calculation", "held", "auto")
    allowed = {part for word in (*keys, *choices) for part in re.findall(r"[a-z]+", word.lower())}
    words = {word.lower() for word in re.findall(r"[A-Za-z]{4,}", both.loopfile.read_text("utf-8"))} - allowed
    assert {"level", "gate", "target"} <= words
    for path in sorted(both.folder.rglob("*")):
        body = path.read_bytes().lower()
        for name in RULES:
            body = body.replace(name.encode(), b"")  # "level-crossing" is a rule, not the column
        # "sign" is a word of a comment and a part of "signals": whole words only, but names not even as a part.
        assert [word for word in words if re.search(rf"(?<![a-z]){word}(?![a-z])".encode(), body)] == []
        assert not any(name in body for name in (b"level", b"gate", b"target", both.own.loop.name.encode()))
        assert [word for word in words if word in path.name] == []
    assert sorted(path.name for path in both.folder.iterdir()) == ["loop-1.csv", "loop-1.toml"]


def test_no_number_and_no_time_of_the_log_is_in_the_copy(canal: Pair) -> None:
    rows = [row.split(",") for row in (canal.folder / "loop-1.csv").read_text("utf-8").splitlines()[1:]]
    levels = {
        float(row.split(",")[1]) for row in canal.loopfile.with_suffix(".csv").read_text("utf-8").splitlines()[1:]
    }
    assert {float(row[1]) for row in rows}.isdisjoint(levels)
    assert not any(row[0].startswith("2025-06") for row in rows)


def moved(folder: Path, level: float) -> Path:
    """The synthetic log at another level, its limits with it."""
    path = write_log(folder, scene(n=3000).run(), more=EVERY_RULE)
    rows = [row.split(",") for row in (folder / "truth.csv").read_text().splitlines()]
    body = [[t, repr(float(y) + level), repr(float(r) + level), u] for t, y, r, u in rows[1:]]
    (folder / "truth.csv").write_text("\n".join(",".join(row) for row in [rows[0], *body]) + "\n")
    text = path.read_text().replace("low = 1.7", f"low = {1.7 + level}").replace("high = 2.3", f"high = {2.3 + level}")
    path.write_text(text)
    return path


def test_a_shift_is_made_where_it_is_exact_and_changes_no_count(tmp_path: Path) -> None:
    both = pair(moved(tmp_path, 3.0))
    assert both.key.measurement_offset != 0.0
    np.testing.assert_array_equal(both.key.measurement(both.copy.record.y), both.own.record.y)
    for own, copy in zip(both.own.replays, both.copy.replays, strict=True):
        np.testing.assert_array_equal(own.members["updates"], copy.members["updates"])
        # Exact as well: the level stays between two powers of two, where rounding moves along with it.
        np.testing.assert_array_equal(own.members["rms_error"], both.key.error(copy.members["rms_error"]))


def test_no_shift_where_it_would_cost_a_digit(canal: Pair, synthetic: Pair) -> None:
    # Both levels lie around 2, a power of two; one also has a rule on the level itself.
    assert canal.key.measurement_offset == synthetic.key.measurement_offset == 0.0


def test_exactness_of_a_shift() -> None:
    assert is_exact(np.array([1.5, 1.25]), 0.25)
    assert not is_exact(np.array([1.5, 0.1]), 1.0)


ODD = """
[loop]
name = "Ludorra blower 3"
period = "60s"

[log]
path = "ludorra.csv"
time = "stamp"
timezone = "Europe/Lisbon"
exclude = [{ from = "2025-03-02T02:00", to = "2025-03-02T03:00", why = "diffuser cleaned" }]

[signals]
measurement = { column = "oxygen", unit = "mg/l", scale = 0.1, offset = -0.3, range = [0.0, 9.0] }
setpoint = { value = 2.0, unit = "mg/l" }
actuator = { column = "blower", unit = "%", low = 0, high = 100, max_rate = 2.0 }
disturbances = [{ column = "inflow", unit = "m3/s", stored = "on-change" }]
mode = { column = "stand", automatic = ["REGELT"] }

[controller]
gain = 11.0
repeats_per_minute = 0.1
derivative_time = "30s"
form = "series"
error_deadband = 0.01

[limits]
low = 0.7
band = 0.4

[failsafe]
after = "30min"
action = 35.0

[[rules]]
rule = "send-on-delta"
delta = 0.2
"""


def odd_log(folder: Path) -> Path:
    """Empty cells, a word, a fill value, a repeated stamp, a value out of range, a manual spell, a hole."""
    rng = np.random.default_rng(11)
    lines = ["stamp;oxygen;blower;inflow;stand"]
    level = 23.0 + np.cumsum(rng.normal(0, 0.05, 1500))
    for k, y in enumerate(level.tolist()):
        if 700 <= k < 720:
            continue
        oxygen = {50: "", 51: "Scan Timeout", 52: "-999", 53: "940.5"}.get(k, f"{y:.4f}")
        inflow = {0: "0.31", 400: "0.35", 900: ""}.get(k, "")
        stand = {0: "REGELT", 1000: "HAND", 1040: "REGELT"}.get(k, "")
        stamp = f"2025-03-02 {k // 60:02d}:{k % 60:02d}:00" if k < 1440 else f"2025-03-03 00:{k - 1440:02d}:00"
        lines += [f"{stamp};{oxygen};{50 + 0.1 * (k % 30):.1f};{inflow};{stand}"] * (2 if k == 300 else 1)
    (folder / "ludorra.csv").write_text("\n".join(lines) + "\n", "utf-8")
    path = folder / "ludorra.toml"
    path.write_text(ODD, "utf-8")
    return path


def shared(path: Path, folder: Path, seed: int) -> tuple[Loop, Disguised]:
    loop = au.read_loop(path)
    copy = disguise(loop, seed=seed)
    write_disguised(copy, path, folder)
    return loop, copy


@pytest.mark.parametrize("seed", range(4))
def test_an_odd_log_reads_back_sample_for_sample(tmp_path: Path, seed: int) -> None:
    loop, copy = shared(odd_log(tmp_path), tmp_path / "shared", seed)
    record, other = au.read_record(loop), au.read_record(au.read_loop(tmp_path / "shared" / "loop-1.toml"))
    assert differences(record, other, copy.key) == []
    assert set(np.unique(record.cause)) >= {1, 2, 3, 4}  # gap, manual, excluded, bad value: all are in the log
    bodies = b"".join(file.read_bytes() for file in (tmp_path / "shared").iterdir()).lower()
    for word in ("ludorra", "oxygen", "blower", "inflow", "regelt", "hand", "timeout", "lisbon", "diffuser", "-999"):
        assert word.encode() not in bodies


def test_a_log_with_rows_per_tag_reads_back_sample_for_sample(tmp_path: Path) -> None:
    """Tags at times of their own, a repeated row, an empty cell and a manual spell."""
    path = odd_log(tmp_path)
    rows = ["stamp,signal,number"]
    for line in (tmp_path / "ludorra.csv").read_text("utf-8").splitlines()[1:]:
        stamp, *cells = line.split(";")
        late = stamp[:-2] + "10"
        for tag, cell, at in zip(
            ("oxygen", "blower", "inflow", "stand"), cells, (stamp, late, stamp, stamp), strict=True
        ):
            if cell or tag == "oxygen":
                rows.append(f"{at},{tag},{cell}")
    (tmp_path / "ludorra.csv").write_text("\n".join(rows) + "\n", "utf-8")
    layout = 'path = "ludorra.csv"\nlayout = "long"\ntag = "signal"\nvalue = "number"'
    path.write_text(ODD.replace('path = "ludorra.csv"', layout), "utf-8")
    loop, copy = shared(path, tmp_path / "shared", 6)
    record, other = au.read_record(loop), au.read_record(au.read_loop(tmp_path / "shared" / "loop-1.toml"))
    assert copy.loop.log.layout == "long"
    assert differences(record, other, copy.key) == []
    assert record.in_span.mean() > 0.5
    body = (tmp_path / "shared" / "loop-1.csv").read_text("utf-8")
    assert not any(word in body for word in ("oxygen", "blower", "stand", "REGELT", "signal", "number"))


def test_the_copy_shows_the_hour_of_the_logs_own_clock_on_another_day(tmp_path: Path) -> None:
    shared(odd_log(tmp_path), tmp_path / "shared", 3)
    first = (tmp_path / "shared" / "loop-1.csv").read_text("utf-8").splitlines()[1]
    assert re.match(r"20(0\d|1[0-5])-\d\d-\d\dT00:00:00Z,", first)
    assert not first.startswith("2025")


def test_stated_numbers_are_converted(tmp_path: Path) -> None:
    loop, copy = shared(odd_log(tmp_path), tmp_path / "shared", 1)
    read = au.read_loop(tmp_path / "shared" / "loop-1.toml")
    a, b = copy.key.measurement_exponent, copy.key.actuator_exponent
    own, hidden = loop.controller, read.controller
    assert hidden.gain == math.ldexp(own.gain, b - a)
    assert (hidden.integral_time, hidden.derivative_time) == (own.integral_time, own.derivative_time)
    assert hidden.derivative_filter == own.derivative_filter
    assert hidden.error_deadband == math.ldexp(0.01, a)
    assert read.limits.band == math.ldexp(0.4, a)
    assert read.limits.low == math.ldexp(0.7, a) + copy.key.measurement_offset
    assert read.limits.high is None
    assert read.signals.actuator.max_rate == math.ldexp(2.0, b)
    assert read.extras["failsafe"]["action"] == math.ldexp(35.0, b)
    assert read.approval == loop.approval == {}


def test_without_rules_the_copy_names_the_standard_panel(tmp_path: Path) -> None:
    path = write_log(tmp_path, scene(n=3000).run())
    loop, copy = shared(path, tmp_path / "shared", 2)
    read = au.read_loop(tmp_path / "shared" / "loop-1.toml")
    model = au.identify(au.read_record(loop), loop)
    from auditor.panel import make_settings, requested

    settings = make_settings(loop, au.read_record(loop), model.controller, model.tau_cl_s)
    hidden = requested(read, read.period)
    assert copy.panel
    assert [(s.rule, s.link) for s in hidden] == [(s.rule, s.link) for s in settings]
    for one, other in zip(settings, hidden, strict=True):
        if one.rule == "send-on-delta":
            assert copy.key.error(np.array(other.values["delta"])) == one.values["delta"]


def test_same_seed_same_copy_and_a_key_comes_back_from_its_file(tmp_path: Path) -> None:
    loop = au.read_loop(odd_log(tmp_path))
    one, other, third = (disguise(loop, seed=seed) for seed in (7, 7, 8))
    assert key_text(one.key) == key_text(other.key) != key_text(third.key)
    path = tmp_path / "some.key.json"
    path.write_text(key_text(one.key), "utf-8")
    assert key_text(read_key(path)) == key_text(one.key)
    path.write_text('{"format": "something else"}', "utf-8")
    with pytest.raises(LoopFileError, match="no key"):
        read_key(path)


def test_the_key_is_never_in_the_folder_to_share_and_nothing_is_overwritten(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    path = odd_log(tmp_path)
    assert run(["disguise", str(path), "--out", str(tmp_path)]) == 3
    assert "key" in capsys.readouterr().err
    assert run(["disguise", str(path), "--out", str(tmp_path / "x"), "--seed", "1"]) == 0
    told = capsys.readouterr().out
    assert "ludorra.x.key.json" in told
    assert "do not share" in told
    before = (tmp_path / "ludorra.x.key.json").read_bytes()
    assert run(["disguise", str(path), "--out", str(tmp_path / "x"), "--seed", "2"]) == 3
    assert (tmp_path / "ludorra.x.key.json").read_bytes() == before


def test_a_failed_write_leaves_nothing(tmp_path: Path) -> None:
    path = odd_log(tmp_path)
    copy = disguise(au.read_loop(path), seed=1)
    (tmp_path / "taken").write_text("a file where a folder is needed")
    with pytest.raises(OutputError):
        write_disguised(copy, path, tmp_path / "taken" / "deeper")
    assert not list(tmp_path.glob("*.key.json"))


def test_the_toml_writer_reads_back() -> None:
    body = {
        "plain": 'quote " back \\ tab \t line \n bell \x07 é ☃',
        "odd key.": [1, 2.5, -0.0, 1e-300, 1e300, 0.1, True],
        "inner": {"from": "a", "list": [{"x": 1.0}, {"y": False}]},
        "absent": None,
    }
    read = tomllib.loads(table("[head]", body))["head"]
    assert read == {name: value for name, value in body.items() if value is not None}
    assert math.copysign(1.0, read["odd key."][2]) == -1.0
    with pytest.raises(TypeError):
        written(None)
