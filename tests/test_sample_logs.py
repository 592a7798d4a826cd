"""The sample logs come out of their script again, their loop files read, and what the README says of them is true."""

from __future__ import annotations

import importlib.util
import sys
import tomllib
from pathlib import Path

import numpy as np
import pyarrow.parquet as pq
import pytest

from auditor.logs.align import read_record
from auditor.loopfile import read_loop
from auditor.synthetic import send_on_delta

FOLDER = Path(__file__).parent.parent / "sample_logs"
NAMES = ("canal-pool", "aeration", "heat-station", "booster-pump")


@pytest.fixture(scope="module")
def script():
    spec = importlib.util.spec_from_file_location("make_logs", FOLDER / "make_logs.py")
    module = importlib.util.module_from_spec(spec)
    # Dataclasses look their module up by name.
    sys.modules[spec.name] = module
    spec.loader.exec_module(module)
    yield module
    del sys.modules[spec.name]


@pytest.fixture(scope="module")
def scenarios(script):
    return {name: make(1) for name, (make, _) in script.SAMPLES.items()}


@pytest.fixture(scope="module")
def truths(scenarios):
    """What really happened, an update at every sample."""
    return {name: scenario.run() for name, scenario in scenarios.items()}


@pytest.fixture(scope="module")
def loop_files():
    return {name: tomllib.loads((FOLDER / f"{name}.toml").read_text(encoding="utf-8")) for name in NAMES}


@pytest.mark.parametrize("name", ["canal-pool", "aeration"])
def test_csv_comes_out_with_the_same_bytes(name, script, scenarios, truths, tmp_path):
    script.SAMPLES[name][1](scenarios[name], truths[name], tmp_path)
    again, bundled = (np.fromfile(folder / f"{name}.csv", np.uint8) for folder in (tmp_path, FOLDER))
    # Not compared with ==, whose explanation of two texts of a million characters takes minutes.
    assert np.array_equal(again, bundled)


@pytest.mark.parametrize(
    ("name", "kind"),
    [("heat-station", "timestamp[ms, tz=UTC]"), ("booster-pump", "timestamp[us, tz=Europe/Oslo]")],
)
def test_parquet_comes_out_with_the_same_values(name, kind, script, scenarios, truths, tmp_path):
    script.SAMPLES[name][1](scenarios[name], truths[name], tmp_path)
    again, bundled = (pq.read_table(folder / f"{name}.parquet") for folder in (tmp_path, FOLDER))
    assert again.equals(bundled)
    assert str(bundled.schema.field("time").type) == kind


def test_the_script_makes_all_of_them_where_it_is_told(script, monkeypatch, tmp_path):
    made = []
    monkeypatch.setattr(sys, "argv", ["make_logs.py", "--out", str(tmp_path / "new"), "--seed", "3"])

    class Small:
        def __init__(self, seed):
            self.seed = seed

        def run(self):
            return "run"

    def writer(name):
        return lambda scenario, done, folder: made.append((name, scenario.seed, done, folder))

    monkeypatch.setattr(script, "SAMPLES", {name: (Small, writer(name)) for name in script.SAMPLES})
    script.main()
    assert made == [(name, 3, "run", tmp_path / "new") for name in NAMES]
    assert (tmp_path / "new").is_dir()


def test_they_are_small_enough_to_travel_with_the_package():
    logs = [*FOLDER.glob("*.csv"), *FOLDER.glob("*.parquet")]
    assert len(logs) == 4
    assert sum(path.stat().st_size for path in logs) < 4_000_000


@pytest.mark.parametrize("name", NAMES)
def test_loop_files_state_the_loop_that_was_simulated(name, scenarios, loop_files):
    stated, scenario = loop_files[name], scenarios[name]
    loop = read_loop(FOLDER / f"{name}.toml")
    assert loop.name == name
    assert loop.period == scenario.period
    assert loop.limits.stated
    assert loop.limits.max_silence is not None
    assert loop.accept.min_hours < 0.9 * len(scenario.setpoint) * scenario.period / 3600
    actuator, truth = loop.signals.actuator, scenario.controller
    assert (actuator.low, actuator.high) == (truth.low, truth.high)
    assert (actuator.max_rate or np.inf) == truth.max_rate
    assert loop.signals.measurement.resolution == scenario.y_step
    if name == "booster-pump":
        assert "controller" not in stated
    else:
        given = loop.controller
        assert (given.gain, given.integral_time, given.integral) == (truth.gain, truth.integral_time, truth.integral)
        assert given.anti_windup == truth.anti_windup


@pytest.mark.parametrize(
    ("name", "rows", "spans"),
    [("canal-pool", 29_929, 4), ("aeration", 34_560, 2), ("heat-station", 43_200, 1), ("booster-pump", 43_200, 1)],
)
def test_the_records_are_what_was_simulated(name, rows, spans, scenarios, truths):
    record, truth = read_record(read_loop(FOLDER / f"{name}.toml")), truths[name]
    assert record.rows == rows
    assert len(record) == len(truth.y)
    assert len(record.spans) == spans
    assert record.start == scenarios[name].stamps[0].as_unit("ns").value
    for recorded, simulated in ((record.y, truth.y), (record.r, truth.r), (record.u, truth.u)):
        # Decimal text against binary multiples of the resolution: rounding only.
        np.testing.assert_allclose(recorded[record.valid], simulated[record.valid], atol=1e-9)


def test_the_dirt_of_the_canal_is_there(loop_files):
    rows = (FOLDER / "canal-pool.csv").read_text(encoding="utf-8").splitlines()[1:]
    # 21 days of minutes, less outages of 180 and 135 minutes, four rows twice.
    assert len(rows) == 21 * 1440 - 180 - 135 + 4
    assert len(set(rows)) == len(rows) - 4
    by_hand = {row.split(",")[3] for row in rows if row.endswith("MAN")}
    assert {"44.00", "51.00"} <= by_hand
    assert sum(row.endswith("MAN") for row in rows) == 75


def test_the_probe_is_frozen_while_it_is_wiped():
    rows = (FOLDER / "aeration.csv").read_text(encoding="utf-8").splitlines()[1:]
    wiped = [row.split(";") for row in rows if row.endswith("CLEANING")]
    assert len(wiped) == 150
    assert wiped[0][0] == "18.03.2025 10:00:00"
    assert len({row[1] for row in wiped}) == 1
    assert {row[3] for row in wiped} == {"58,0"}


def told(scenario, limits, done):
    """Share of updates saved, RMS error, and seconds outside the limits."""
    automatic = scenario.automatic
    outside = (done.y < limits["low"]) | (done.y > limits["high"])
    rms = np.sqrt(np.mean(done.error[automatic] ** 2))
    return 1 - done.updated[automatic].mean(), rms, scenario.period * outside[automatic].sum()


@pytest.mark.parametrize("name", NAMES)
def test_no_record_leaves_its_limits(name, scenarios, truths, loop_files):
    saved, rms, outside = told(scenarios[name], loop_files[name]["limits"], truths[name])
    assert saved == 0
    assert rms < loop_files[name]["accept"]["max_rms_error"]
    assert outside == 0


@pytest.mark.parametrize(("name", "delta", "longest"), [("canal-pool", 0.008, 120), ("heat-station", 0.11, 300)])
def test_where_a_rule_would_truly_have_paid(name, delta, longest, scenarios, loop_files):
    accept, scenario = loop_files[name]["accept"], scenarios[name]
    done = scenario.run(send_on_delta(delta, longest=longest))
    saved, rms, outside = told(scenario, loop_files[name]["limits"], done)
    assert saved > accept["min_saved_fraction"]
    assert rms < accept["max_rms_error"]
    assert outside == 0


def test_where_a_rule_would_truly_have_been_dangerous(scenarios, loop_files):
    stated, scenario = loop_files["booster-pump"], scenarios["booster-pump"]
    done = scenario.run(send_on_delta(0.06, shortest=8, longest=60))
    saved, rms, outside = told(scenario, stated["limits"], done)
    assert saved > stated["accept"]["min_saved_fraction"]
    assert rms < stated["accept"]["max_rms_error"]
    # Saving and error would do; half a minute below the supply contract's pressure would not.
    assert outside > 30
