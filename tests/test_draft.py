"""Drafts of loop files from exports as plants make them: every role must be found, and the file must be readable."""

import datetime
import functools
import gzip
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from auditor.draft import Draft, draft, peek, whole
from auditor.draft.clock import period_text
from auditor.draft.dress import look_at
from auditor.draft.ranges import actuator_range, constant_setpoint
from auditor.draft.roles import find_roles, name_weight
from auditor.draft.words import is_unit, names, unit_of
from auditor.errors import LogError, LoopFileError
from auditor.logs.align import read_record
from auditor.logs.record import Span
from auditor.loop import Loop
from auditor.loopfile import read_loop

START = datetime.datetime(2025, 2, 26, 22, 0, tzinfo=datetime.UTC)
ROWS = 1500


@functools.cache
def world(setpoint: str = "steps", seed: int = 1, rows: int = ROWS, direct: bool = False) -> dict[str, np.ndarray]:
    """A PI loop on a lag with a slow load and a measurement rounded to 1 mm: level, target, gate, offtake."""
    rng = np.random.default_rng(seed)
    sign = -1.0 if direct else 1.0
    r = np.full(rows, 2.0)
    if setpoint == "steps":
        for k, value in ((300, 2.1), (700, 1.95), (1200, 2.05)):
            r[k:] = value
    y, u, w = np.zeros(rows), np.zeros(rows), np.zeros(rows)
    x, load, integral = 0.0, 0.0, 0.0
    for k in range(rows):
        y[k] = np.round(2.0 + x + rng.normal(0, 0.002), 3)
        e = r[k] - y[k]
        u[k] = np.clip(45.0 + sign * (60 * e + integral), 0, 100)
        integral += 60 * e / 20
        load = 0.98 * load + rng.normal(0, 0.004)
        w[k] = 3.0 + 4 * load
        x += (sign * (u[k] - 45.0) * 0.01 - load - x) / 15
    return {"y": y, "r": r, "u": u, "w": w}


def stamps(rows: int = ROWS, step: float = 60.0, form: str = "%Y-%m-%dT%H:%M:%SZ") -> list[str]:
    return [(START + datetime.timedelta(seconds=step * k)).strftime(form) for k in range(rows)]


def table(header: list[str], columns: list[list[str]], delimiter: str = ",", before: str = "", units: str = "") -> str:
    rows = [delimiter.join(cells) for cells in zip(*columns, strict=True)]
    return before + "\n".join([delimiter.join(header), *([units] if units else []), *rows]) + "\n"


def cells(values: np.ndarray, digits: int = 4, decimal: str = ".") -> list[str]:
    return [f"{value:.{digits}f}".replace(".", decimal) for value in values]


def drafted(path: Path, text: str | bytes, encoding: str = "utf-8") -> tuple[Draft, Loop]:
    """Write the log, draft beside it, and read the draft as a loop file."""
    path.write_bytes(text if isinstance(text, bytes) else text.encode(encoding))
    return read_back(path)


def read_back(log: Path) -> tuple[Draft, Loop]:
    made = draft(log)
    assert made.fill_in == ()
    file = log.parent / "drafted.toml"
    file.write_text(made.text, encoding="utf-8")
    return made, read_loop(file)


def roles(loop: Loop) -> tuple[str | None, ...]:
    s = loop.signals
    return s.measurement.column, s.setpoint.column, s.actuator.column


def test_plain_csv(tmp_path):
    w = world()
    text = table(["time", "level_m", "target_m", "gate", "offtake_m3s"], [stamps(), *map(cells, w.values())])
    made, loop = drafted(tmp_path / "pool 7.csv", text)
    assert roles(loop) == ("level_m", "target_m", "gate")
    assert (loop.name, loop.period, loop.log.time, loop.log.timezone) == ("pool 7", 60.0, "time", None)
    assert (loop.signals.measurement.unit, loop.signals.setpoint.unit) == ("m", "m")
    assert (loop.signals.actuator.low, loop.signals.actuator.high) == (0.0, 100.0)
    assert made.value("log.delimiter") is None
    assert made.value("log.encoding") is None
    assert loop.limits.low is None
    assert not loop.limits.stated
    assert '# column = "offtake_m3s"' in made.text


def test_german_semicolons_decimal_comma_cp1252(tmp_path):
    w = world()
    header = ["Zeitstempel", "Füllstand [m]", "Sollwert [m]", "Stellgröße [%]", "Abfluss [m3/s]"]
    columns = [stamps(form="%d.%m.%Y %H:%M:%S"), *(cells(v, decimal=",") for v in w.values())]
    made, loop = drafted(tmp_path / "becken.csv", table(header, columns, ";"), "cp1252")
    assert roles(loop) == ("Füllstand [m]", "Sollwert [m]", "Stellgröße [%]")
    assert (loop.log.delimiter, loop.log.decimal, loop.log.encoding) == (";", ",", "cp1252")
    assert (loop.log.timezone, loop.log.time_format) == ("UTC", None)
    assert (loop.signals.measurement.unit, loop.signals.actuator.unit) == ("m", "%")
    assert (loop.signals.actuator.low, loop.signals.actuator.high) == (0.0, 100.0)
    zone = next(g for g in made.guesses if g.key == "log.timezone")
    assert zone.sure == "please check"


def test_dutch_tabs_units_line_and_preamble(tmp_path):
    w = world(seed=2)
    header = ["Tijdstip", "Klepstand", "Druk", "Streefwaarde", "Debiet"]
    columns = [stamps(step=1.0), cells(w["u"]), cells(w["y"]), cells(w["r"]), cells(w["w"])]
    before = "Export van opvoergemaal De Linde\nAangemaakt: 2025-03-02\n\n"
    text = table(header, columns, "\t", before, units="\t%\tbar\tbar\tm3/h")
    _, loop = drafted(tmp_path / "opvoergemaal.txt", text)
    assert roles(loop) == ("Druk", "Streefwaarde", "Klepstand")
    assert (loop.log.delimiter, loop.log.skip_rows, loop.period) == ("\t", 3, 1.0)
    assert (loop.signals.measurement.unit, loop.signals.actuator.unit) == ("bar", "%")


def test_french_day_first_and_twelve_hour_clock(tmp_path):
    w = world(seed=3)
    header = ["Horodatage", "Consigne", "Mesure oxygène (mg/l)", "Vanne d'air"]
    columns = [stamps(form="%d/%m/%Y %I:%M:%S %p"), cells(w["r"]), cells(w["y"]), cells(w["u"])]
    _, loop = drafted(tmp_path / "aeration.csv", table(header, columns, ";"))
    assert roles(loop) == ("Mesure oxygène (mg/l)", "Consigne", "Vanne d'air")
    assert loop.log.time_format == "%d/%m/%Y %I:%M:%S %p"
    assert loop.period == 60.0


def test_month_first_is_told_from_day_first_by_the_steps_at_midnight(tmp_path):
    # The log runs over 9 to 10 February: with day and month exchanged it would jump by months at midnight.
    w = world()
    times = [
        (datetime.datetime(2025, 2, 9) + datetime.timedelta(minutes=k)).strftime("%m/%d/%Y %H:%M") for k in range(ROWS)
    ]
    columns = [times, *map(cells, w.values())]
    made, loop = drafted(tmp_path / "log.csv", table(["Date", "PV", "SP", "OP", "flow"], columns))
    assert loop.log.time_format == "%m/%d/%Y %H:%M"
    assert made.guesses[3].sure == "sure"
    assert roles(loop) == ("PV", "SP", "OP")


def test_one_day_leaves_day_and_month_open(tmp_path):
    w = world()
    times = [f"03/04/2025 {k // 60:02d}:{k % 60:02d}" for k in range(1400)]
    columns = [times, *(cells(v)[:1400] for v in w.values())]
    made, _ = drafted(tmp_path / "log.csv", table(["Date", "PV", "SP", "OP", "flow"], columns))
    guess = next(g for g in made.guesses if g.key == "log.time_format")
    assert guess.sure == "please check"
    assert "%m/%d/%Y" in guess.reason


def test_names_that_mislead(tmp_path):
    # A slave loop, as in a heat station: its output is the setpoint of the next controller and is called so.
    w = world(seed=4)
    header = ["time", "SupplyTemperatureSP", "SupplyTemperature", "PrimaryFlowSP"]
    _, loop = drafted(tmp_path / "slave.csv", table(header, [stamps(), cells(w["r"]), cells(w["y"]), cells(w["u"])]))
    assert roles(loop) == ("SupplyTemperature", "SupplyTemperatureSP", "PrimaryFlowSP")


def test_names_that_are_exchanged_outright(tmp_path):
    w = world(seed=5)
    _, loop = drafted(
        tmp_path / "log.csv",
        table(["time", "levelSP", "valve", "PV"], [stamps(), cells(w["y"]), cells(w["r"]), cells(w["u"])]),
    )
    assert roles(loop) == ("levelSP", "valve", "PV")


def test_no_setpoint_column(tmp_path):
    w = world("constant", seed=6)
    columns = [stamps(), cells(w["y"]), cells(w["u"]), cells(w["w"])]
    made, loop = drafted(tmp_path / "pressure.csv", table(["time", "pressure", "pump", "flow"], columns))
    assert roles(loop) == ("pressure", None, "pump")
    # The integral action holds the mean at the setpoint 2.0, within the rounding to half the spread.
    assert loop.signals.setpoint.value == pytest.approx(2.0, abs=0.01)
    assert next(g for g in made.guesses if g.key == "signals.setpoint.value").sure == "please check"


def test_constant_setpoint_column_beside_another_constant(tmp_path):
    w = world("constant", seed=7)
    extra = [cells(np.full(ROWS, 7.5)), cells(np.full(ROWS, 2.0)), cells(w["y"]), cells(w["u"])]
    _, loop = drafted(tmp_path / "log.csv", table(["time", "a", "b", "c", "d"], [stamps(), *extra]))
    assert roles(loop) == ("c", "b", "d")


def test_epoch_milliseconds_and_a_row_counter(tmp_path):
    w = world(seed=8)
    ms = [str(round(1000 * START.timestamp()) + 500 * k) for k in range(ROWS)]
    header = ["id", "ts", "p_set", "p_actual", "speed"]
    columns = [list(map(str, range(ROWS))), ms, cells(w["r"]), cells(w["y"]), cells(w["u"])]
    _, loop = drafted(tmp_path / "air.csv", table(header, columns, "|"))
    assert roles(loop) == ("p_actual", "p_set", "speed")
    assert (loop.log.time, loop.log.time_unit, loop.period) == ("ts", "ms", 0.5)


def test_elapsed_seconds(tmp_path):
    w = world()
    columns = [[f"{2.5 * k:.1f}" for k in range(ROWS)], *map(cells, w.values())]
    made, loop = drafted(tmp_path / "log.csv", table(["t", "y", "r", "u", "w"], columns))
    assert (loop.log.time, loop.log.time_unit, loop.period) == ("t", "s", 2.5)
    assert next(g for g in made.guesses if g.key == "log.time").sure == "please check"
    assert roles(loop) == ("y", "r", "u")


def test_date_and_time_of_day_in_two_columns(tmp_path):
    w = world(seed=9)
    header = ["Datum", "Uhrzeit", "Istwert", "Sollwert", "Ventil"]
    columns = [stamps(form="%d.%m.%Y"), stamps(form="%H:%M:%S"), cells(w["y"]), cells(w["r"]), cells(w["u"])]
    _, loop = drafted(tmp_path / "log.csv", table(header, columns, ";"))
    assert loop.log.time == "Datum + Uhrzeit"
    assert roles(loop) == ("Istwert", "Sollwert", "Ventil")


def test_mode_column_and_manual_stretch(tmp_path):
    w = {key: value.copy() for key, value in world(seed=10).items()}
    w["u"][500:800] = 30.0
    modes = ["HAND" if 500 <= k < 800 else "AUTOMATIK" for k in range(ROWS)]
    header = ["Zeit", "Betriebsart", "Ist", "Soll", "Klappe"]
    columns = [stamps(), modes, cells(w["y"]), cells(w["r"]), cells(w["u"])]
    _, loop = drafted(tmp_path / "log.csv", table(header, columns))
    assert roles(loop) == ("Ist", "Soll", "Klappe")
    assert (loop.signals.mode.column, loop.signals.mode.automatic) == ("Betriebsart", ("AUTOMATIK",))


def test_parquet_with_zone(tmp_path):
    w = world(seed=11)
    times = pa.array([START + datetime.timedelta(seconds=60 * k) for k in range(ROWS)], pa.timestamp("us", tz="UTC"))
    pq.write_table(pa.table({"stamp": times, "a": w["u"], "b": w["y"], "c": w["r"]}), tmp_path / "log.parquet")
    _, loop = read_back(tmp_path / "log.parquet")
    assert roles(loop) == ("b", "c", "a")
    assert (loop.log.time, loop.log.timezone, loop.log.delimiter) == ("stamp", None, None)


def test_folder_of_parquet_parts(tmp_path):
    w = world(seed=12)
    (tmp_path / "parts").mkdir()
    for n in range(3):
        rows = slice(500 * n, 500 * n + 500)
        times = [START.replace(tzinfo=None) + datetime.timedelta(seconds=60 * k) for k in range(ROWS)[rows]]
        part = pa.table({"time": pa.array(times, pa.timestamp("ms")), **{key: value[rows] for key, value in w.items()}})
        pq.write_table(part, tmp_path / "parts" / f"{n}.parquet")
    _, loop = read_back(tmp_path / "parts")
    assert loop.log.paths == ("parts",)
    assert roles(loop) == ("y", "r", "u")
    assert loop.log.timezone == "UTC"


def test_long_layout(tmp_path):
    w = world(seed=13)
    rows = ["time;tag;value;quality"]
    for k, stamp in enumerate(stamps()):
        rows += [f"{stamp};{tag};{w[key][k]:.4f};Good" for tag, key in (("LT1", "y"), ("LT1.SP", "r"), ("GV1", "u"))]
    _, loop = drafted(tmp_path / "history.csv", "\n".join(rows))
    assert (loop.log.layout, loop.log.tag, loop.log.value, loop.log.quality) == ("long", "tag", "value", "quality")
    assert roles(loop) == ("LT1", "LT1.SP", "GV1")
    assert loop.period == 60.0
    record = read_record(loop)
    np.testing.assert_array_equal(record.y, np.round(w["y"], 4))
    assert record.spans == (Span(0, ROWS),)


def test_newest_row_first_and_old_line_ends(tmp_path):
    w = world(seed=16)
    columns = [column[::-1] for column in (stamps(), cells(w["y"]), cells(w["r"]), cells(w["u"]))]
    text = table(["time", "level", "target", "gate"], columns).replace("\n", "\r")
    _, loop = drafted(tmp_path / "log.csv", text)
    assert roles(loop) == ("level", "target", "gate")
    assert loop.period == 60.0


def test_spoiled_rows_and_a_footer_do_not_hide_the_clock(tmp_path):
    w = world(seed=17)
    times = [stamp if k % 40 else "no time" for k, stamp in enumerate(stamps())]
    text = table(["time", "level", "target", "gate"], [times, cells(w["y"]), cells(w["r"]), cells(w["u"])])
    _, loop = drafted(tmp_path / "log.csv", text + "End of export\n")
    assert (loop.log.time, loop.log.timezone, loop.period) == ("time", None, 60.0)
    assert roles(loop) == ("level", "target", "gate")


def test_a_name_with_control_characters_stays_out_of_comments(tmp_path):
    w = world()
    text = table(["time", "level", "target", "ga\x07te", "q\x07"], [stamps(), *map(cells, w.values())])
    _, loop = drafted(tmp_path / "log.csv", text)
    assert loop.signals.actuator.column == "ga\x07te"


def test_utf16_and_gzip(tmp_path):
    w = world()
    text = table(["time", "level", "target", "gate", "offtake"], [stamps(), *map(cells, w.values())])
    _, loop = drafted(tmp_path / "wide.csv", text, "utf-16")
    assert roles(loop) == ("level", "target", "gate")
    _, loop = drafted(tmp_path / "packed.csv.gz", gzip.compress(text.encode()))
    assert roles(loop) == ("level", "target", "gate")


def test_direct_action_saturation_and_text_states(tmp_path):
    w = {key: value.copy() for key, value in world(seed=14, direct=True).items()}
    w["u"] = np.clip(w["u"], 40, 50)
    level = cells(w["y"])
    level[100:110] = ["Bad"] * 10
    header = ["time", "x1", "x2", "x3"]
    _, loop = drafted(tmp_path / "log.csv", table(header, [stamps(), level, cells(w["r"]), cells(w["u"])]))
    assert roles(loop) == ("x1", "x2", "x3")


def test_only_beginning_middle_and_end_of_a_long_log_are_read(tmp_path, monkeypatch):
    monkeypatch.setattr("auditor.draft.peek.PART", 20_000)
    w = world(seed=15)
    text = table(["time", "level", "target", "gate", "offtake"], [stamps(), *map(cells, w.values())])
    assert len(text) > 3 * 20_000
    made, loop = drafted(tmp_path / "log.csv", text)
    assert "beginning, middle and end" in made.text
    assert roles(loop) == ("level", "target", "gate")
    assert loop.period == 60.0


def local_stamps(moments: list[datetime.datetime]) -> list[str]:
    return [moment.strftime("%Y-%m-%d %H:%M:%S") for moment in moments]


@pytest.mark.parametrize("turn", ["autumn", "spring"])
def test_clock_with_summer_time_must_be_placed_by_a_person(tmp_path, turn):
    w = world()
    start = datetime.datetime(2024, 10, 26, 12) if turn == "autumn" else datetime.datetime(2025, 3, 29, 12)
    hour = datetime.timedelta(hours=-1 if turn == "autumn" else 1)
    # 15 h after noon it is three (autumn: back to two) or two o'clock (spring: on to three) on Sunday.
    change = 15 * 60 if turn == "autumn" else 14 * 60
    moments = [start + datetime.timedelta(minutes=k) + (hour if k >= change else 0 * hour) for k in range(ROWS)]
    log = tmp_path / "log.csv"
    header = ["time", "level", "target", "gate", "offtake"]
    log.write_text(table(header, [local_stamps(moments), *map(cells, w.values())]))
    made = draft(log)
    assert made.fill_in == ("log.timezone",)
    with pytest.raises(LoopFileError) as error:
        read_draft(tmp_path, made)
    assert len(error.value.problems) == 1
    problem = error.value.problems[0]
    line = next(
        n for n, row in enumerate(made.text.splitlines(), 1) if "# FILL IN" in row and row.startswith("timezone")
    )
    assert f"line {line}: log.timezone" in problem.where
    assert "filled in by you" in problem.do


def read_draft(folder: Path, made: Draft) -> Loop:
    (folder / "drafted.toml").write_text(made.text, encoding="utf-8")
    return read_loop(folder / "drafted.toml")


def test_zone_named_in_the_preamble(tmp_path):
    w = world()
    before = "Plant: Brackwell pool 3; time zone Europe/Lisbon\n"
    header = ["time", "level", "target", "gate", "offtake"]
    text = table(header, [stamps(form="%Y-%m-%d %H:%M"), *map(cells, w.values())], before=before)
    _, loop = drafted(tmp_path / "log.csv", text)
    assert (loop.log.timezone, loop.log.skip_rows) == ("Europe/Lisbon", 1)


def test_no_header_row(tmp_path):
    w = world()
    log = tmp_path / "log.csv"
    log.write_text("\n".join(",".join(row) for row in zip(stamps(), *map(cells, w.values()), strict=True)))
    made = draft(log)
    assert made.fill_in == (
        "log.time",
        "signals.measurement.column",
        "signals.setpoint.column",
        "signals.actuator.column",
    )
    assert "column 2 of the log" in made.text
    with pytest.raises(LoopFileError) as error:
        read_draft(tmp_path, made)
    assert len(error.value.problems) == 4


def test_nameless_time_column_and_a_name_that_stands_twice(tmp_path):
    w = world()
    log = tmp_path / "log.csv"
    columns = [stamps(), cells(w["y"]), cells(w["r"]), cells(w["u"]), cells(w["w"])]
    log.write_text(table(["", "level", "target", "gate", "gate"], columns))
    made = draft(log)
    assert made.value("log.time") == '""'
    assert made.fill_in == ("signals.actuator.column",)
    with pytest.raises(LoopFileError) as error:
        read_draft(tmp_path, made)
    assert [problem.what for problem in error.value.problems] == ["signals.actuator.column is empty"]


def test_no_loop_to_see(tmp_path):
    log = tmp_path / "log.csv"
    log.write_text(table(["time", "level"], [stamps(), cells(world()["y"])]))
    made = draft(log)
    assert made.fill_in == tuple(f"signals.{role}.column" for role in ("measurement", "setpoint", "actuator"))
    with pytest.raises(LoopFileError) as error:
        read_draft(tmp_path, made)
    assert all("filled in by you" in problem.do for problem in error.value.problems)


def test_no_time_column(tmp_path):
    log = tmp_path / "log.csv"
    columns = list(map(cells, world().values()))
    log.write_text(table(["level", "target", "gate", "offtake"], columns))
    made = draft(log)
    assert made.fill_in == ("loop.period", "log.time")
    assert made.value("signals.actuator.column") == '"gate"'


@pytest.mark.parametrize(
    ("content", "what"),
    [
        (b"", "empty"),
        (b"PK\x03\x04rest", "not a text table"),
        (b"just\nsome\nwords\n", "no table"),
        (b"a,b\n", "empty"),
    ],
)
def test_what_is_no_log(tmp_path, content, what):
    (tmp_path / "log.csv").write_bytes(content)
    with pytest.raises(LogError, match=what):
        draft(tmp_path / "log.csv")


def test_missing_log(tmp_path):
    with pytest.raises(LogError, match="no such log"):
        draft(tmp_path / "nothing.csv")


def test_path_is_written_from_the_loop_files_folder(tmp_path):
    (tmp_path / "logs").mkdir()
    log = tmp_path / "logs" / "pool.csv"
    log.write_text(table(["time", "level", "target", "gate", "offtake"], [stamps(), *map(cells, world().values())]))
    assert draft(log, folder=tmp_path).value("log.path") == '"logs/pool.csv"'


def test_every_guess_is_in_the_text_with_its_reason(tmp_path):
    log = tmp_path / "pool.csv"
    log.write_text(table(["time", "level", "target", "gate", "offtake"], [stamps(), *map(cells, world().values())]))
    made = draft(log)
    for guess in made.guesses:
        assert f"{guess.key.rpartition('.')[2]} = {guess.value}\n" in made.text
        assert f"# {guess.sure}: {guess.reason[:20]}" in made.text
    again = draft(log)
    assert again.text == made.text


@pytest.mark.parametrize("kind", ["lag", "integrator"])
def test_roles_by_behaviour_alone(kind):
    """Loops without names, gains of either sign, actuators rounded to 0, 0.1 or 1 %: all roles found, most for sure."""
    clear = 0
    for seed in range(20):
        grid = _random_loop(kind, seed)
        found = find_roles([f"tag {n}" for n in range(5)], grid, np.ones(len(grid), dtype=bool))
        assert (found.measurement, found.setpoint, found.actuator) == (0, 1, 2), seed
        clear += found.clear
    # Rounding to 1 % hides some of the law in about a third of the loops.
    assert clear >= 14


def _random_loop(kind: str, seed: int, rows: int = 1200) -> np.ndarray:
    rng = np.random.default_rng(seed)
    lag, delay, sign = rng.uniform(5, 30), int(rng.integers(0, 4)), rng.choice([-1.0, 1.0])
    gain = sign * (lag / (delay + 2) * 0.4 if kind == "lag" else 0.35 * lag / (delay + 1))
    ti = lag if kind == "lag" else 12.0 * (delay + 2)
    r = np.full(rows, 20.0)
    for k in rng.integers(100, rows, int(rng.integers(0, 6))):
        r[k:] = 20.0 + rng.uniform(-2, 2)
    load = np.zeros(rows)
    y, u = np.zeros(rows), np.zeros(rows)
    x, integral = 0.0, 0.0
    quantum = rng.choice([0.0, 0.1, 1.0])
    for k in range(rows):
        load[k] = 0.98 * load[k - 1] + rng.normal(0, 0.3) if k else 0.0
        y[k] = 20.0 + x + rng.normal(0, 0.03)
        e = r[k] - y[k]
        u[k] = np.clip(50 + gain * e + integral, 0, 100)
        u[k] = np.round(u[k] / quantum) * quantum if quantum else u[k]
        integral += gain * e / ti
        drive = sign * (u[max(k - delay, 0)] - 50) + load[k]
        x += (drive - (x if kind == "lag" else 0.0)) / lag
    return np.column_stack([y, r, u, load + 8.0, np.full(rows, 31.0)])


@pytest.mark.parametrize(
    ("header", "unit"),
    [
        ("level [m]", "m"),
        ("Druck (bar)", "bar"),
        ("flow_m3h", "m3/h"),
        ("Temperatur in °C", "°C"),
        ("valve_pct", "%"),
        ("level", ""),
        ("tank (north)", ""),
        ("LIC101.PV", ""),
    ],
)
def test_unit_of(header, unit):
    assert unit_of(header) == unit


@pytest.mark.parametrize(
    ("header", "role", "word"),
    [
        ("SupplyTemperatureSP", "setpoint", "SP"),
        ("Stellgröße", "actuator", "Stellgröße"),
        ("Consigne de niveau", "setpoint", "Consigne"),
        ("Drucksollwert", "setpoint", "Drucksollwert"),
        ("spare", "setpoint", None),
        ("Klepstand 3", "actuator", "Klepstand"),
    ],
)
def test_names(header, role, word):
    assert names(header, role) == word


@pytest.mark.parametrize(
    ("header", "role", "weight"),
    [
        ("pump pressure", "measurement", 0.5),
        ("pump pressure", "actuator", 0.0),
        ("pump speed", "actuator", 1.0),
        ("Füllstand [m]", "measurement", 0.5),
        ("level setpoint", "measurement", -0.5),
        ("valve position SP", "setpoint", 1.0),
        ("tag 17", "actuator", 0.0),
    ],
)
def test_name_weight(header, role, weight):
    assert name_weight(header, role) == weight


def test_is_unit():
    assert is_unit("[m3/h]")
    assert not is_unit("pool")


@pytest.mark.parametrize(
    ("seconds", "text"),
    [(0.25, "250ms"), (59.98, "60s"), (900.0, "15min"), (3600.0, "1h"), (2.5, "2.5s"), (86400.0, "1d"), (90.0, "90s")],
)
def test_period_text(seconds, text):
    assert period_text(seconds) == text


@pytest.mark.parametrize(
    ("values", "unit", "low", "high", "sure"),
    [
        ([12.0, 50.0, 87.0], "%", 0.0, 100.0, "likely"),
        ([0.0, 0.0, 60.0, 99.0], "%", 0.0, 100.0, "sure"),
        ([5.0, 12.0, 19.0], "mA", 4.0, 20.0, "likely"),
        ([310.0, 700.0, 700.0, 655.0], "rpm", 310.0, 700.0, "please check"),
        ([0.0, 0.4, 1.0], "", 0.0, 1.0, "likely"),
    ],
)
def test_actuator_range(values, unit, low, high, sure):
    found = actuator_range(np.array(values), unit)
    assert (found.low, found.high, found.sure) == (low, high, sure)


def test_actuator_range_unknown():
    found = actuator_range(np.linspace(200.0, 300.0, 500), "rpm")
    assert (found.low, found.high) == (None, None)


def test_constant_setpoint_is_rounded_to_what_the_spread_allows():
    values = 2.0 + 0.03 * np.sin(np.arange(5000)) + 0.0004
    assert constant_setpoint(values) == 2.0


def test_delimiter_is_not_taken_from_decimal_commas():
    text = "t;a;b\n" + "".join(f"{k};1,{k};2,{k}\n" for k in range(10, 60))
    dress = look_at(text, "utf-8")
    assert (dress.delimiter, dress.decimal, dress.names, dress.body) == (";", ",", ("t", "a", "b"), 1)


@pytest.mark.parametrize(
    ("values", "unit", "low", "high"),
    [
        ([20.0] * 30 + [*np.linspace(20.5, 98.0, 70)], "%", 20.0, 100.0),
        ([*np.linspace(3.0, 79.5, 970)] + [80.0] * 30, "%", 0.0, 80.0),
        # Stored in steps of 10 %, without a stop: its last steps are the rarest.
        ([30.0] * 5 + [40.0] * 50 + [50.0] * 50 + [60.0] * 5, "%", 0.0, 100.0),
    ],
)
def test_an_end_at_which_many_rows_stand_is_the_limit(values, unit, low, high):
    found = actuator_range(np.array(values), unit)
    assert (found.low, found.high) == (low, high)
    assert ("stood at exactly" in found.reason + found.high_reason) == ((low, high) != (0.0, 100.0))


def long_loop(rows: int) -> str:
    """A log of one row per second whose last rows hold the extremes: in automatic, then in manual."""
    w = {name: values.copy() for name, values in world(rows=rows).items()}
    w["y"][-20], w["y"][-5] = 9.0, 77.0
    mode = ["AUTO"] * (rows - 10) + ["HAND"] * 10
    columns = [stamps(rows, step=1.0), *map(cells, (w["y"], w["r"], w["u"])), mode]
    return table(["time", "level_m", "target_m", "gate", "mode"], columns)


def test_the_hints_are_of_every_row_in_automatic(tmp_path):
    made, _ = drafted(tmp_path / "pool.csv", long_loop(25_000))
    assert "up to 9 m, in automatic" in made.text
    assert "77" not in made.text.partition("[limits]")[2]


def test_a_log_read_in_parts_is_read_whole_for_the_hints(tmp_path, monkeypatch):
    monkeypatch.setattr(peek, "PART", 100_000)
    made, _ = drafted(tmp_path / "pool.csv", long_loop(12_000))
    assert "its beginning, middle and end" in made.text
    assert "up to 9 m, in automatic\n" in made.text
    monkeypatch.setattr(whole, "MOST_BYTES", 1000)
    made, _ = drafted(tmp_path / "pool.csv", long_loop(12_000))
    assert " rows looked at" in made.text
