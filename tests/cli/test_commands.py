"""The commands as a user calls them: exit codes, what is printed where, and what is left behind."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

from auditor.cli.app import run
from auditor.cli.replay import parse
from auditor.cli.screen import table_with_notes
from auditor.errors import CommandError
from tests.truth import scene, write_log

RULES = '[[rules]]\nrule = "send-on-delta"\ndelta = [0.008, 0.02]\n'


@pytest.fixture(scope="module")
def loopfile(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_log(tmp_path_factory.mktemp("loop"), scene(n=6000).run(), more=RULES)


@pytest.fixture(scope="module")
def modelfile(loopfile: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("model") / "model.json"
    assert run(["identify", str(loopfile), "--quick", "--save", str(path)]) == 0
    return path


def test_help_is_light() -> None:
    code = (
        "import sys\n"
        "from auditor.cli.app import run\n"
        "assert run(['--help']) == 0\n"
        "heavy = {'numba', 'pandas', 'matplotlib', 'scipy', 'pyarrow', 'pydantic', 'jinja2'} & set(sys.modules)\n"
        "assert not heavy, heavy\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    assert "audit" in done.stdout


@pytest.mark.parametrize("command", ["demo", "draft", "check", "identify", "replay", "audit", "rules", "disguise"])
def test_every_command_has_help(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert run([command, "--help"]) == 0
    assert "Usage" in capsys.readouterr().out


def test_wrong_command_line_is_two() -> None:
    assert run(["adit"]) == 2
    assert run(["audit"]) == 2
    assert run(["replay", "x.toml", "--rule", "send-on-delta", "--set", "delta"]) == 2


def test_missing_loop_file_is_three_and_says_what_where_and_what_to_do(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["check", "no-such.toml"]) == 3
    told = capsys.readouterr().err
    assert "no-such.toml" in told
    assert "do:" in told
    assert "Traceback" not in told


def test_missing_column_is_three_with_the_columns_there_are(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = write_log(tmp_path, scene(n=400).run())
    path.write_text(path.read_text().replace('column = "level"', 'column = "levle"'))
    assert run(["check", str(path)]) == 3
    told = capsys.readouterr().err
    assert "levle" in told
    assert "level" in told


@pytest.mark.parametrize("content", [b"", b"\x00\x01\x02\xff" * 400], ids=["empty", "binary"])
def test_empty_and_binary_logs_are_three(content: bytes, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = write_log(tmp_path, scene(n=400).run())
    (tmp_path / "truth.csv").write_bytes(content)
    assert run(["audit", str(path), "--out", str(tmp_path / "out")]) == 3
    assert "truth.csv" in capsys.readouterr().err
    assert not (tmp_path / "out").exists()


def test_a_still_actuator_is_four_and_the_report_is_written(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = write_log(tmp_path, scene(n=1500).run())
    log = tmp_path / "truth.csv"
    rows = [line.rsplit(",", 1)[0] + ",40.0" for line in log.read_text().splitlines()[1:]]
    log.write_text("\n".join(["time,level,target,gate", *rows]) + "\n")
    assert run(["audit", str(path), "--out", str(tmp_path / "out")]) == 4
    shown = capsys.readouterr().out
    assert "UNDECIDED" in shown
    assert "actuator" in shown
    result = json.loads((tmp_path / "out" / "audit.json").read_text())
    assert result["verdict"]["decision"] == "undecided"
    assert result["replays"] == []
    assert result["baseline"]["rms_error"] > 0
    assert (tmp_path / "out" / "report.html").exists()


def test_check_prints_what_was_found(loopfile: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["check", str(loopfile)]) == 0
    shown = capsys.readouterr().out
    assert "6,000 rows" in shown
    assert "smallest threshold" in shown
    assert "Ideal form: gain 150.0 %/m, integral time 50 min" in shown


def test_check_as_json_is_json_alone(loopfile: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["check", str(loopfile), "--json"]) == 0
    captured = capsys.readouterr()
    assert json.loads(captured.out)["samples"] == 6000
    assert captured.err == ""


def test_replay_with_a_saved_model(loopfile: Path, modelfile: Path, tmp_path: Path, capsys) -> None:
    series = tmp_path / "series.csv"
    arguments = ["replay", str(loopfile), "--rule", "send-on-delta", "--set", "delta=0.01", "--set", "min_gap=2min"]
    assert run([*arguments, "--model", str(modelfile), "--series", str(series), "--json"]) == 0
    result = json.loads(capsys.readouterr().out)
    assert result["replay"]["settings"] == {"delta": 0.01, "min_gap_s": 120.0, "max_silence_s": 7200.0}
    assert result["replay"]["min_gap_s"] >= 120.0
    assert series.read_text().startswith("time,setpoint,measurement,actuator,replayed_measurement")


@pytest.mark.parametrize(
    "arguments",
    [
        ["replay", "--rule", "send-on-delta", "--set", "delta=0.01", "--series", "x.txt"],
        ["identify", "--plot", "x.txt"],
    ],
    ids=["series", "plot"],
)
def test_an_unknown_suffix_is_three_before_anything_is_computed(loopfile: Path, arguments: list[str], capsys) -> None:
    assert run([arguments[0], str(loopfile), *arguments[1:]]) == 3
    told = capsys.readouterr().err
    assert ".txt" in told
    assert "identify" not in told


def test_unknown_rule_is_three_before_anything_is_computed(loopfile: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["replay", str(loopfile), "--rule", "send-on-dleta", "--set", "delta=0.01"]) == 3
    told = capsys.readouterr().err
    assert "did you mean 'send-on-delta'" in told
    assert "identify" not in told


def test_audit_writes_its_files_and_prints_the_decision(loopfile: Path, modelfile: Path, tmp_path, capsys) -> None:
    out = tmp_path / "out"
    assert run(["audit", str(loopfile), "--model", str(modelfile), "--out", str(out), "--quick", "--seed", "7"]) == 0
    captured = capsys.readouterr()
    assert any(word in captured.out for word in ("SWITCH", "KEEP", "UNDECIDED"))
    assert all(len(line) <= 100 for line in captured.out.splitlines()[:-1])
    for name in ("report.html", "audit.json", "model.json", "replays.csv", "flags.csv"):
        assert (out / name).stat().st_size > 0
    assert not list(out.rglob(".*"))
    # The model was identified with seed 1, and nothing else is drawn.
    assert json.loads((out / "audit.json").read_text())["provenance"]["seed"] == 1


def test_audit_as_json_is_json_alone(loopfile: Path, modelfile: Path, tmp_path: Path, capsys) -> None:
    arguments = ["audit", str(loopfile), "--model", str(modelfile), "--out", str(tmp_path / "o"), "--quick", "--json"]
    assert run(arguments) == 0
    captured = capsys.readouterr()
    assert json.loads(captured.out)["format"] == "auditor/audit"
    assert captured.err == ""


def test_a_folder_that_cannot_be_written_is_three(loopfile: Path, modelfile: Path, tmp_path: Path, capsys) -> None:
    blocked = tmp_path / "blocked"
    blocked.write_text("a file where a folder should be")
    assert run(["audit", str(loopfile), "--model", str(modelfile), "--out", str(blocked), "--quick"]) == 3
    assert "blocked" in capsys.readouterr().err


def test_draft_writes_a_loop_file_once(loopfile: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    target = tmp_path / "new.toml"
    assert run(["draft", str(loopfile.parent / "truth.csv"), "--out", str(target)]) == 0
    assert "level" in capsys.readouterr().out
    assert run(["check", str(target)]) == 0
    assert run(["draft", str(loopfile.parent / "truth.csv"), "--out", str(target)]) == 3


def test_demo_lists_its_samples_and_refuses_others(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["demo", "canal-pol"]) == 2
    assert "did you mean 'canal-pool'" in capsys.readouterr().err


def test_rules_are_explained(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["rules"]) == 0
    assert "send-on-delta" in capsys.readouterr().out
    assert run(["rules", "level-crossing"]) == 0
    shown = capsys.readouterr().out
    assert "hysteresis" in shown
    assert "Lebesgue" in shown


def test_a_fault_of_the_program_is_one_and_asks_for_a_report(monkeypatch, capsys: pytest.CaptureFixture[str]) -> None:
    import auditor.rules

    def broken(name: str) -> None:
        raise ZeroDivisionError("made by the test")

    monkeypatch.setattr(auditor.rules, "get_rule", broken)
    assert run(["rules", "periodic"]) == 1
    told = capsys.readouterr().err
    assert "please report it" in told
    assert "ZeroDivisionError" in told


def test_a_decimal_comma_in_a_setting_is_told() -> None:
    with pytest.raises(CommandError, match=r"use a point: 0\.1"):
        parse(["delta=0,1"])


def test_demo_refuses_a_folder_with_another_loop(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "mine.toml").write_text("")
    assert run(["demo", "canal-pool", "--out", str(tmp_path)]) == 2
    assert "mine.toml" in capsys.readouterr().err
    assert [path.name for path in tmp_path.iterdir()] == ["mine.toml"]


def test_check_tells_a_wrong_rule_before_the_log_is_read(loopfile: Path, capsys: pytest.CaptureFixture[str]) -> None:
    broken = loopfile.with_name("broken.toml")
    broken.write_text(loopfile.read_text() + '\n[[rules]]\nrule = "send-on-deltaa"\ndelta = 0.1\n')
    assert run(["check", str(broken)]) == 3
    told = capsys.readouterr().err
    assert "send-on-deltaa" in told
    assert "reading the log" not in told


def test_a_narrow_last_column_goes_below_its_row() -> None:
    rows = [["k" * 30, "v" * 30, "a reason in many words " * 5]]
    shown = table_with_notes(["key", "guess", "why"], rows).splitlines()
    assert max(map(len, shown)) <= 80
    assert shown[3].startswith("    a reason")
    assert table_with_notes(["key", "why"], [["k", "a reason"]]).splitlines()[2] == "k    a reason"
