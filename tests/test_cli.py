"""The command as users and scripts meet it: exit codes, one line per fault, files whole or not at all."""

import json
import os
import pty
import re
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from bayesdesign import cli
from bayesdesign.core.errors import Refused
from bayesdesign.render import deliver

STUDY = """
[study]
title = "Spray nozzle trial"
field = "agronomy"
[effect]
favourable = "higher"
smallest_relevant = 1.5
planning_value = 2.5
unit = "kg per tree"
[design]
family = "two_means"
n_per_group = 40
sd = 5.0
analysis = "z"
[prior]
effect = { distribution = "normal", mean = 1.8, sd = 1.5 }
[rule]
type = "significance"
[target]
measure = "assurance"
at_least = 0.8
max_n = 2000
"""
BANNED = re.compile(r"accept\w* the null|no effect\b", re.IGNORECASE)


@pytest.fixture
def study(tmp_path):
    path = tmp_path / "study.toml"
    path.write_text(STUDY, encoding="utf-8")
    return str(path)


def command(*arguments, **options):
    options = {"capture_output": True, "text": True, "timeout": 100, "encoding": "utf-8"} | options
    return subprocess.run([sys.executable, "-m", "bayesdesign", *arguments], **options)


def call(capsys, *arguments):
    """Exit code, standard output, lines on standard error; in this process."""
    code = cli.main(list(arguments))
    shown = capsys.readouterr()
    return code, shown.out, shown.err.splitlines()


def test_evaluate_prints_text(capsys, study):
    code, out, err = call(capsys, "evaluate", study)
    assert (code, err) == (0, [])
    assert "about 42 runs would conclude" in " ".join(out.split())


@pytest.mark.parametrize(
    "given", [["--n", "20", "40", "80"], ["--n", "20", "--n", "40", "--n", "80"], ["--n=20", "40", "80"]]
)
def test_several_sizes(capsys, study, given):
    code, out, err = call(capsys, "evaluate", study, *given, "--json")
    assert (code, err) == (0, [])
    assert [entry["n"] for entry in json.loads(out)["results"]] == [20, 40, 80]


def test_sizes_before_the_file(capsys, study):
    code, out, _ = call(capsys, "evaluate", "--json", "--n", "20", "40", study)
    assert code == 0
    assert [entry["n"] for entry in json.loads(out)["results"]] == [20, 40]


def test_json_keeps_the_contract(capsys, study):
    _, out, _ = call(capsys, "evaluate", study, "--json")
    document = json.loads(out, parse_constant=pytest.fail)
    assert list(document) == ["format", "command", "study", "results", "messages", "provenance"]
    assert document["format"] == "bayesdesign/1"
    assert document["command"] == "evaluate"
    assert document["provenance"]["seed"] == 20260101
    assert document["results"][0]["quantities"]["assurance"]["value"] == pytest.approx(0.41, abs=0.02)
    assert out.startswith('{\n  "format"')
    assert out.endswith("}\n")


def test_same_bytes_again(study):
    first, second = (command("evaluate", study, "--json").stdout for _ in range(2))
    assert first == second != ""


def test_size_found(capsys, study):
    code, out, _ = call(capsys, "size", study, "--json")
    size = json.loads(out)["size"]
    assert code == 0
    assert size["first_n"] == json.loads(out)["results"][0]["n"]
    assert size["achieved"] >= 0.8


@pytest.mark.parametrize("json_too", [True, False])
def test_target_that_cannot_be_met(capsys, study, json_too):
    Path(study).write_text(STUDY.replace("at_least = 0.8", "at_least = 0.95"), encoding="utf-8")
    code, out, err = call(capsys, "size", study, *(["--json"] if json_too else []))
    assert (code, err) == (4, [])
    if json_too:
        assert json.loads(out)["size"]["first_n"] is None
        assert json.loads(out)["size"]["ceiling"] == pytest.approx(0.885, abs=1e-3)
    else:
        assert "ceiling is 0.8849" in " ".join(out.split())


def test_check(capsys, study):
    code, out, err = call(capsys, "check", study)
    assert (code, err) == (0, [])
    assert "The file is sound." in out
    code, out, _ = call(capsys, "check", study, "--json")
    assert json.loads(out)["command"] == "check"
    assert json.loads(out)["says"]


@pytest.mark.parametrize(
    "known",
    [
        ["--decision", "not_reject"],
        ["--estimate", "1.2", "--se", "1.1"],
        ["--p-value", "0.04", "--decision", "reject_higher"],
    ],
)
def test_interpret(capsys, study, known):
    code, out, err = call(capsys, "interpret", study, *known)
    assert (code, err) == (0, [])
    assert "belief, in 100" in out
    assert max(map(len, out.splitlines())) <= 80
    assert not BANNED.search(" ".join(out.split()))
    code, out, err = call(capsys, "interpret", study, *known, "--json")
    document = json.loads(out, parse_constant=pytest.fail)
    assert sum(document["posterior"]["state_probabilities"].values()) == pytest.approx(1)
    assert not BANNED.search(out)


def test_new_can_be_evaluated(capsys, tmp_path):
    path = str(tmp_path / "new.toml")
    assert call(capsys, "new", "one_mean", "--out", path)[0] == 0
    assert call(capsys, "check", path)[0] == 0


def test_schema_is_json(capsys):
    code, out, _ = call(capsys, "schema")
    assert code == 0
    assert json.loads(out)["$schema"].startswith("https://json-schema.org/")


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        (["evalute", "S"], "Did you mean 'evaluate'"),
        (["evaluate", "S", "--tolerence", "1"], "Did you mean '--tolerance'"),
        (["evaluate", "S", "--n", "ten"], "not a whole number"),
        (["evaluate", "S", "--n", "40", "80.5"], "not a whole number"),
        (["evaluate", "S", "--n", "1"], "not a possible size"),
        (["evaluate", "S", "--n", "-5"], "not a possible size"),
        (["evaluate", "S", "--route", "guess"], "'guess' is not one of"),
        (["evaluate", "S", "--draws", "3"], "3 is not in the range"),
        (["evaluate", "S", "--tolerance", "nan"], "tolerance"),
        (["evaluate"], "Missing argument 'STUDY.toml'"),
        (["evaluate", "missing.toml"], "missing.toml: there is no such file"),
        (["interpret", "S"], "nothing is reported"),
        (["interpret", "S", "--decision", "accept"], "not a decision of this rule"),
        (["interpret", "S", "--p-value", "much"], "not a p-value"),
        (["interpret", "S", "--data", "x.csv"], "not available yet"),
        (["interpret", "S", "--estimate", "nan", "--se", "1"], "--estimate"),
        (["new", "two_meanz"], "two_means"),
        (["evaluate", "S", "--out", "nowhere/x.txt"], "its folder does not exist"),
        (["evaluate", "S", "--out", "."], "is a folder"),
        (["evaluate", "S", "--out", "S"], "is the study file itself"),
        (["evaluate", "S", "--out", os.devnull], "is not a regular file"),
    ],
)
def test_wrong_input_is_one_line_and_exit_2(capsys, study, arguments, says):
    code, out, err = call(capsys, *(study if a == "S" else a for a in arguments))
    assert (code, out, len(err)) == (2, "", 1)
    assert says in err[0]


def test_every_fault_has_its_line(capsys, study):
    Path(study).write_text(
        STUDY.replace('"significance"', '"significance"\nalpha = 2').replace('"higher"', '"up"'),
        encoding="utf-8",
    )
    code, out, err = call(capsys, "check", study)
    assert (code, out) == (2, "")
    assert len(err) == 2
    assert all(line.startswith(f"{study}: [") for line in err)


def test_hostile_file_name_drives_nothing(capsys):
    code, _, err = call(capsys, "check", "\x1b[2Jstudy\n.toml")
    assert (code, len(err)) == (2, 1)
    assert "\x1b" not in err[0]


def test_refused(capsys, study, monkeypatch):
    def refuse(*_, **__):
        raise Refused("assurance: the routes disagree", "try more draws")

    monkeypatch.setattr(sys.modules["bayesdesign.evaluate"], "evaluate", refuse)
    code, out, err = call(capsys, "evaluate", study)
    assert (code, out) == (3, "")
    assert err == ["bayesdesign: assurance: the routes disagree; try more draws"]


@pytest.mark.parametrize(
    ("raised", "exit_code", "says"),
    [
        (RuntimeError("odd\nthing"), 1, "a bug, please report it"),
        (KeyboardInterrupt(), 130, "interrupted"),
        (MemoryError(), 3, "memory"),
    ],
)
def test_what_goes_wrong_inside(capsys, study, monkeypatch, raised, exit_code, says):
    def fail(*_, **__):
        raise raised

    monkeypatch.setattr(sys.modules["bayesdesign.evaluate"], "evaluate", fail)
    out = Path(study).with_name("out.txt")
    code, shown, err = call(capsys, "evaluate", study, "--out", str(out))
    lines = [line for line in err if line]
    assert (code, shown, len(lines)) == (exit_code, "", 1)
    assert says in lines[0]
    assert list(out.parent.iterdir()) == [Path(study)]


def test_debug_shows_the_bug(study, monkeypatch):
    def fail(*_, **__):
        raise RuntimeError("odd")

    monkeypatch.setattr(sys.modules["bayesdesign.evaluate"], "evaluate", fail)
    with pytest.raises(RuntimeError, match="odd"):
        cli.main(["evaluate", study, "--debug"])


def test_out_holds_what_would_be_printed(capsys, study, tmp_path):
    _, printed, _ = call(capsys, "evaluate", study, "--json")
    target = tmp_path / "größe.json"
    target.write_text("old")
    code, out, err = call(capsys, "evaluate", study, "--json", "--out", str(target))
    assert (code, out, err) == (0, "", [f"written to {target}"])
    assert target.read_text(encoding="utf-8") == printed
    assert call(capsys, "evaluate", study, "--out", str(target), "--quiet")[1:] == ("", [])
    assert sorted(p.name for p in tmp_path.iterdir()) == ["größe.json", "study.toml"]


def test_failed_write_leaves_the_old_file(capsys, study, tmp_path, monkeypatch):
    target = tmp_path / "out.txt"
    target.write_text("old")

    def full(_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(deliver.os, "fsync", full)
    code, _, err = call(capsys, "evaluate", study, "--out", str(target))
    assert (code, len(err)) == (2, 1)
    assert "No space left" in err[0]
    assert target.read_text() == "old"
    assert sorted(p.name for p in tmp_path.iterdir()) == ["out.txt", "study.toml"]


def test_link_keeps_pointing_to_its_file(capsys, study, tmp_path):
    real, link = tmp_path / "real.txt", tmp_path / "link.txt"
    real.write_text("old")
    link.symlink_to(real)
    assert call(capsys, "evaluate", study, "--out", str(link))[0] == 0
    assert link.is_symlink()
    assert "Spray nozzle" in real.read_text(encoding="utf-8")


def test_reader_that_goes_away(study):
    code = f"{sys.executable} -m bayesdesign evaluate {study} --json | head -c 10; exit ${{PIPESTATUS[0]}}"
    done = subprocess.run(["bash", "-c", code], capture_output=True, text=True, timeout=100, check=False)
    assert (done.returncode, done.stderr) == (0, "")


def test_closed_stdout_ends_quietly(study):
    read_end, write_end = os.pipe()
    os.close(read_end)
    done = command("evaluate", study, capture_output=False, stdout=write_end, stderr=subprocess.PIPE)
    os.close(write_end)
    assert (done.returncode, done.stderr) == (0, "")


def test_plain_encoding_gets_plain_signs(study):
    done = command("evaluate", study, env=os.environ | {"PYTHONIOENCODING": "ascii"}, encoding="ascii")
    assert done.returncode == 0
    assert "-----" in done.stdout
    done = command("evaluate", study, "--json", env=os.environ | {"PYTHONIOENCODING": "ascii"})
    assert json.loads(done.stdout)["study"]["title"] == "Spray nozzle trial"


def on_terminal(*arguments, **environment):
    """What the command writes when standard output is a terminal."""
    master, slave = pty.openpty()
    env = {k: v for k, v in os.environ.items() if k != "NO_COLOR"} | {"TERM": "xterm"} | environment
    with subprocess.Popen(
        [sys.executable, "-m", "bayesdesign", *arguments], stdout=slave, stderr=slave, env=env
    ) as process:
        os.close(slave)
        shown = b""
        while True:
            try:
                part = os.read(master, 4096)
            except OSError:
                break
            if not part:
                break
            shown += part
        process.wait(100)
    os.close(master)
    return shown.decode()


def test_colour_on_a_terminal_only(study):
    assert "\x1b[1m" in on_terminal("evaluate", study)
    assert "\x1b" not in on_terminal("evaluate", study, NO_COLOR="1")
    assert "\x1b" not in command("evaluate", study).stdout


def test_interrupt(study, tmp_path):
    target = tmp_path / "out.txt"
    slow = "import time, bayesdesign.evaluate as m, sys; from bayesdesign import cli\n"
    slow += "def wait(*a, **k):\n    print('ready', flush=True); time.sleep(60)\n"
    slow += "sys.modules['bayesdesign.evaluate'].evaluate = wait\n"
    slow += f"sys.exit(cli.main(['evaluate', {study!r}, '--out', {str(target)!r}]))"
    with subprocess.Popen(
        [sys.executable, "-c", slow], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    ) as process:
        assert process.stdout.readline() == "ready\n"
        time.sleep(0.1)
        process.send_signal(signal.SIGINT)
        _, err = process.communicate(timeout=60)
    assert process.returncode == 130
    assert err.split() == ["interrupted;", "nothing", "was", "written"]
    assert not target.exists()


def test_check_stays_light(study):
    heavy = ("scipy.stats", "xarray", "rich", "pymc", "pytensor", "arviz", "nutpie", "pandas")
    code = f"import sys; from bayesdesign.cli import main; main(['check', {study!r}]); "
    code += f"print([m for m in {heavy} if m in sys.modules])"
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, timeout=60, check=True
    )
    assert done.stdout.splitlines()[-1] == "[]"
