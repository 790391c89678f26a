"""The command line: answers, options, exit statuses."""

from __future__ import annotations

import csv
import io
import json
import math
import os
import stat
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner

import nodal
from nodal.cli import main, replace_file

ROOT = Path(__file__).parents[2]
CIRCUITS = sorted((ROOT / "circuits").glob("*.nodal"))
PROBE = str(ROOT / "circuits" / "bench_probe.nodal")
DIVIDER = str(ROOT / "circuits" / "ideal_divider.nodal")

TWO_SOURCES = """nodal 1
source high: plus to ground = 1 V behind 10 Ω
source low: minus to ground = 1 V behind 20 Ω
branch across: plus to minus = 1 kΩ
branch down: minus to ground = 1 kΩ
reading screen: plus to minus
sweep 1 Hz to 1 MHz, 10 per decade
"""


def run(*arguments: str, **extra):
    result = CliRunner().invoke(main, list(arguments), **extra)
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return result


def fails(*arguments: str, code: str, **extra) -> str:
    """The call ends with status 2 and this one finding; its rendered text."""
    result = run(*arguments, **extra)
    assert result.exit_code == 2
    assert result.stdout == ""
    assert result.stderr.startswith(f"error[{code}]: ")
    found = run(*arguments, "--json", **extra)
    assert found.exit_code == 2
    assert found.stderr == ""
    assert [d["code"] for d in json.loads(found.stdout)["diagnostics"]] == [code]
    return result.stderr


def test_there_are_circuits():
    assert CIRCUITS


# Answers


def test_the_ideal_divider_is_one_at_every_frequency():
    result = run("sweep", DIVIDER, "--at", "0", "--at", "1e3", "--at", "1GHz", "--json")
    case = json.loads(result.stdout)["cases"]["nominal"]
    assert case["frequency_hz"] == [0.0, 1e3, 1e9]
    (curve,) = case["readings"].values()
    assert curve["re"] == pytest.approx([1.0, 1.0, 1.0], abs=1e-12)
    assert curve["im"] == pytest.approx([0.0, 0.0, 0.0], abs=1e-12)


def test_a_sweep_in_json_keeps_its_contract():
    answer = json.loads(run("sweep", PROBE, "--all-cases", "--node", "core", "--json").stdout)
    assert answer["format"] == 1
    assert answer["tool"] == f"nodal {nodal.__version__}"
    assert answer["file"] == PROBE
    assert list(answer["cases"]) == ["nominal", "spring_tip", "long_clip"]
    case = answer["cases"]["spring_tip"]
    assert set(case) == {"drive", "frequency_hz", "readings", "nodes", "contacts", "quality"}
    assert case["drive"] == "drive"
    assert len(case["frequency_hz"]) == 481
    assert set(case["contacts"]["touch"]) == {"impedance_ohm", "loaded", "undisturbed"}
    assert set(case["quality"]) == {"worst_estimated_error", "points_refined"}
    curves = [case["readings"]["screen"], case["nodes"]["core"], *case["contacts"]["touch"].values()]
    for curve in curves:
        assert len(curve["re"]) == len(curve["im"]) == 481
    sweep = nodal.load(PROBE).network("spring_tip").sweep(case["frequency_hz"])
    assert curves[0]["re"] == sweep.reading("screen").real.tolist()
    assert curves[1]["im"] == sweep.voltage("core").imag.tolist()


def test_what_is_not_finite_is_null_in_json():
    """A capacitive input has an infinite impedance at 0 Hz."""
    text = "nodal 1; source s: a to ground = 1 V behind 1 Ω; branch b: a to c = 1 pF"
    text += "; branch d: c to ground = 1 pF; reading m: c to ground"
    answer = json.loads(run("sweep", "-", "--at", "0", "--json", input=text).stdout)
    assert answer["file"] == "-"
    impedance = answer["cases"]["nominal"]["contacts"]["s"]["impedance_ohm"]
    assert impedance == {"re": [None], "im": [None]}


def test_csv_has_the_numbers_of_json():
    arguments = ("sweep", PROBE, "--from", "1kHz", "--to", "1MHz", "--per-decade", "5")
    rows = list(csv.DictReader(io.StringIO(run(*arguments, "--format", "csv").stdout)))
    case = json.loads(run(*arguments, "--json").stdout)["cases"]["nominal"]
    assert len(rows) == 16
    assert [float(row["frequency_hz"]) for row in rows] == case["frequency_hz"]
    assert [float(row["reading.screen.re_ratio"]) for row in rows] == case["readings"]["screen"]["re"]
    touch = case["contacts"]["touch"]["impedance_ohm"]
    assert [float(row["contact.touch.impedance.im_ohm"]) for row in rows] == touch["im"]


def test_frequencies_take_hertz_and_units():
    arguments = [word for text in ("0", "1e3", "10MHz", "10 MHz", "2.5 kHz") for word in ("--at", text)]
    case = json.loads(run("sweep", DIVIDER, *arguments, "--json").stdout)["cases"]["nominal"]
    assert case["frequency_hz"] == [0.0, 1e3, 1e7, 1e7, 2.5e3]


def test_let_changes_a_value():
    shorter = ("--case", "nominal", "--let", "lead_length=12mm")
    changed = json.loads(run("figures", PROBE, *shorter, "--json").stdout)
    spring = json.loads(run("figures", PROBE, "--case", "spring_tip", "--json").stdout)
    key = "bandwidth(screen)"
    found = changed["cases"]["nominal"]["figures"][key]["value"]
    assert found == pytest.approx(spring["cases"]["spring_tip"]["figures"][key]["value"], rel=1e-12)


def test_figures_in_json_hold_what_the_requirements_ask():
    figures = json.loads(run("figures", PROBE, "--json").stdout)["cases"]["spring_tip"]["figures"]
    assert figures["gain(screen) at 0 Hz"]["unit"] == ""
    assert figures["bandwidth(screen)"]["unit"] == "Hz"
    assert figures["impedance(touch) at 10 MHz"]["value"] >= 1e3
    assert 0 < figures["flatness(screen) from 0 Hz to 50 MHz"]["value"] <= 0.03


def test_an_unreached_bandwidth_says_so():
    figures = json.loads(run("figures", DIVIDER, "--json").stdout)["cases"]["nominal"]["figures"]
    found = figures["bandwidth(screen)"]
    assert (found["value"], found["reason"], found["bound"]) == (None, "not-reached", [">=", 1e9])
    text = run("figures", DIVIDER).stdout
    assert "not reached" in text
    assert "above 1 GHz" in text


def test_figures_in_csv():
    rows = list(csv.DictReader(io.StringIO(run("figures", PROBE, "--format", "csv").stdout)))
    assert {row["case"] for row in rows} == {"nominal", "spring_tip", "long_clip"}
    (gain,) = [r for r in rows if r["case"] == "nominal" and r["figure"] == "gain(screen) at 0 Hz"]
    assert float(gain["value"]) == pytest.approx(1, abs=0.015)


@pytest.mark.parametrize("columns", [80, 100, 200])
@pytest.mark.parametrize("path", CIRCUITS, ids=lambda path: path.stem)
def test_text_fits_the_terminal(path, columns, monkeypatch):
    monkeypatch.setenv("COLUMNS", str(columns))
    for command in ("figures", "sweep"):
        result = run(command, str(path))
        assert result.exit_code == 0
        assert result.stderr == ""
        assert max(map(len, result.stdout.splitlines())) <= min(columns, 100)


def test_long_sweeps_are_thinned_and_say_so():
    text = run("sweep", PROBE).stdout
    assert "9 of 481 points and 4 of interest shown; --format csv for all" in text
    rows = [line.split()[:2] for line in text.splitlines()]
    assert ["10", "Hz"] in rows
    assert ["1", "GHz"] in rows
    assert any(line.endswith("-3 dB") and "-3.01" in line for line in text.splitlines())


def test_many_cases_wrap_to_several_tables():
    cases = "".join(f"case variant_number_{n} {{ let r = {n + 1} kΩ }}\n" for n in range(12))
    text = f"""nodal 1
let r = 1 kΩ
source s: a to ground = 1 V
branch b: a to c = r
branch d: c to ground = 1 kΩ
reading m: c to ground
sweep 1 Hz to 1 kHz, 10 per decade
{cases}"""
    result = run("figures", "-", input=text)
    assert result.exit_code == 0
    lines = result.stdout.splitlines()
    assert max(map(len, lines)) <= 100
    assert sum("gain(m) at 0 Hz" in line for line in lines) > 1
    assert all(f"variant_number_{n}" in result.stdout for n in range(12))


def test_hazardous_voltages_carry_the_caution():
    caution = "no insulation, clearance or safety verification"
    assert caution in run("figures", str(ROOT / "circuits" / "hundred_to_one.nodal")).stdout
    assert caution not in run("figures", PROBE).stdout


# Wrong calls


def test_wrong_names_get_the_nearest():
    assert 'did you mean "spring_tip"?' in fails("sweep", PROBE, "--case", "springtip", code="unknown-case")
    assert 'did you mean "sleeve"?' in fails("sweep", PROBE, "--node", "sleev", code="unknown-node")
    assert 'did you mean "drive"?' in fails("sweep", PROBE, "--drive", "driver", code="unknown-drive")


def test_several_sources_ask_for_a_drive():
    assert "high, low" in fails("sweep", "-", code="drive-needed", input=TWO_SOURCES)
    assert run("sweep", "-", "--drive", "low", input=TWO_SOURCES).exit_code == 0


@pytest.mark.parametrize(
    ("text", "hint"),
    [
        ("10mhz", "10MHz"),
        ("1,5", "hertz"),
        ("-1", "hertz"),
        ("5 V", "Hz"),
        ("nan", "hertz"),
        ("1e999", "beyond"),
    ],
)
def test_wrong_frequencies_are_explained(text, hint):
    assert hint in fails("sweep", PROBE, f"--at={text}", code="bad-frequency")


def test_other_wrong_calls():
    fails("sweep", PROBE, "--from", "1MHz", "--to", "1kHz", code="bad-span")
    fails("sweep", PROBE, "--from", "0", code="bad-span")
    fails("sweep", PROBE, "--per-decade", "1e9", code="too-many-points")
    fails("sweep", PROBE, "--let", "lead_length", code="bad-let")
    fails("sweep", PROBE, "--let", "lead=1mm", code="unknown-let")
    fails("sweep", PROBE, "--at", "1", "--from", "1", code="wrong-call")
    fails("sweep", PROBE, "--case", "nominal", "--all-cases", code="wrong-call")
    fails("sweep", PROBE, "--nod", "x", code="wrong-call")
    fails("sweep", code="wrong-call")
    fails(code="wrong-call")
    fails("explain", "--format", "csv", code="wrong-call")
    fails("compare", PROBE, PROBE, "--format", "csv", code="wrong-call")
    fails("sweeep", PROBE, code="wrong-call")
    fails("sweep", PROBE + "x", code="no-file")
    no_sweep = TWO_SOURCES.replace("sweep 1 Hz to 1 MHz, 10 per decade\n", "drive d: high by 1\n")
    fails("sweep", "-", code="no-sweep", input=no_sweep)
    fails("figures", "-", code="no-sweep", input=no_sweep)


def test_no_summary_of_a_command_is_cut_off():
    listed = run("--help").stdout.partition("Commands:")[2]
    assert "sweep" in listed
    assert "..." not in listed


def test_mistakes_in_a_file_end_with_status_2():
    result = run("figures", "-", input="nodal 1\nbranch b: a to c = 9 M\n")
    assert result.exit_code == 2
    assert "<standard input>:2:" in result.stderr
    assert "error[missing-unit]" in result.stderr


# Where it goes


def test_output_goes_to_a_file_and_keeps_its_permissions(tmp_path):
    target = tmp_path / "answer.json"
    target.write_text("old")
    target.chmod(0o640)
    result = run("sweep", PROBE, "--at", "1e3", "--json", "-o", str(target))
    assert (result.exit_code, result.stdout) == (0, "")
    assert json.loads(target.read_text())["format"] == 1
    assert stat.S_IMODE(target.stat().st_mode) == 0o640
    assert os.listdir(tmp_path) == ["answer.json"]


def test_a_new_file_has_ordinary_permissions(tmp_path):
    target = tmp_path / "new.txt"
    before = os.umask(0o027)
    try:
        run("figures", DIVIDER, "-o", str(target))
    finally:
        os.umask(before)
    assert stat.S_IMODE(target.stat().st_mode) == 0o640


def test_a_link_stays_a_link(tmp_path):
    (tmp_path / "real.txt").write_text("old")
    (tmp_path / "link.txt").symlink_to("real.txt")
    replace_file(str(tmp_path / "link.txt"), "new")
    assert (tmp_path / "link.txt").is_symlink()
    assert (tmp_path / "real.txt").read_text() == "new"


def test_what_cannot_be_written_leaves_nothing_behind(tmp_path):
    fails("figures", DIVIDER, "-o", str(tmp_path / "nowhere" / "x.txt"), code="cannot-write")
    fails("figures", DIVIDER, "-o", str(tmp_path), code="cannot-write")
    assert os.listdir(tmp_path) == []
    target = tmp_path / "kept.txt"
    target.write_text("old")
    assert run("figures", PROBE + "x", "-o", str(target)).exit_code == 2
    assert target.read_text() == "old"


def test_color_only_where_wanted(monkeypatch):
    assert "\x1b[" not in run("figures", DIVIDER).stdout
    assert "\x1b[" in run("figures", DIVIDER, "--color", "always").stdout
    monkeypatch.setenv("NO_COLOR", "1")
    assert "\x1b[" in run("figures", DIVIDER, "--color", "always").stdout
    assert "\x1b[" not in run("figures", DIVIDER, "--color", "never").stdout


def test_warnings_go_to_standard_error_unless_quiet():
    text = Path(DIVIDER).read_text() + "\nlet spare = 1 Ω\n"
    loud = run("figures", "-", "--json", input=text)
    assert "warning[unused-let]" in loud.stderr
    assert json.loads(loud.stdout)["format"] == 1
    assert run("figures", "-", "--quiet", input=text).stderr == ""


def test_a_reader_that_leaves_is_no_complaint():
    command = [sys.executable, "-m", "nodal", "sweep", PROBE, "--all-cases", "--format", "csv"]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, cwd=ROOT)
    assert process.stdout is not None
    assert process.stderr is not None
    process.stdout.readline()
    process.stdout.close()
    complaint = process.stderr.read()
    assert process.wait() == 141
    assert complaint == b""


def test_an_interrupt_is_quiet(monkeypatch):
    def interrupted(path):
        raise KeyboardInterrupt

    monkeypatch.setattr("nodal.design.load", interrupted)
    result = run("figures", PROBE)
    assert (result.exit_code, result.output) == (130, "")


@pytest.mark.parametrize("arguments", [["--help"], ["--version"], ["figures", "--help"]])
def test_help_starts_without_the_heavy_modules(arguments):
    script = (
        "import sys\nfrom nodal.cli import main\n"
        f"try:\n    main({arguments!r})\nexcept SystemExit as done:\n    assert done.code == 0\n"
        "heavy = ('scipy', 'networkx', 'lark', 'matplotlib', 'numpy', 'rich', 'mpmath', 'quantiphy')\n"
        "sys.exit(', '.join(name for name in heavy if name in sys.modules) or 0)\n"
    )
    command = [sys.executable, "-c", script]
    done = subprocess.run(command, capture_output=True, text=True, cwd=ROOT, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    assert "nodal" in done.stdout


# Explanations


def test_explain_lists_every_code():
    from nodal.language.codes import TABLE

    text = run("explain").stdout
    listed = json.loads(run("explain", "--json").stdout)["codes"]
    assert [row["code"] for row in listed] == sorted(row.code for row in TABLE)
    assert all(any(line.startswith(row.code) for line in text.splitlines()) for row in TABLE)


def test_explain_one_code():
    from nodal.language.codes import TABLE

    for row in TABLE:
        result = run("explain", row.code)
        assert result.exit_code == 0
        assert f"{row.severity}[{row.code}]" in result.stdout
        assert row.explanation.split()[0] in result.stdout
    assert 'did you mean "missing-unit"?' in fails("explain", "missing-units", code="unknown-code")


# Numbers


def test_numbers_look_as_people_write_them():
    from nodal.report import numbers

    assert numbers.quantity(9100.0, "Ω") == "9.100 kΩ"
    assert numbers.quantity(1e-6, "V/√Hz") == "1.000 µV/√Hz"
    assert numbers.quantity(math.inf, "Ω") == "∞ Ω"
    assert numbers.quantity(-0.0, "F") == "0 F"
    assert numbers.quantity(-45.0, "°") == "-45.00°"
    assert numbers.quantity(0.999996, "Hz", trim=True) == "1 Hz"
    assert numbers.frequency(217_384_000.0) == "217.384 MHz"
    assert numbers.frequency(1e7) == "10 MHz"
    assert numbers.ratio(0.09987) == "0.099870"
    assert numbers.ratio(1.2346e-7) == "1.2346e-7"
    assert numbers.decibels(-20.0) == "-20.00"
    assert numbers.decibels(float(np.float64(-math.inf))) == "-∞"
    assert numbers.decibels(-1e-9) == "0.0000"
    assert numbers.part_of_one(-0.0123) == "-1.23 %"
    assert numbers.part_of_one(12e-6) == "12.0 ppm"
    assert numbers.part_of_one(-2e-11) == "-2.00e-11"
