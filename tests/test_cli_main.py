"""The command line: what it writes, says and answers; in this process, and as a process of its own."""

from __future__ import annotations

import csv
import io
import json
import os
import subprocess
import sys
from html.parser import HTMLParser
from pathlib import Path

import pytest
from test_cli_case import CASE, GOOD, changed

import flatplan
from flatplan.cli import main, planning
from flatplan.cli.case import example_text, parse_case
from flatplan.show.cautions import CAUTIONS

ROOT = Path(__file__).resolve().parents[1]
ALWAYS = {"report.html", "channels.csv", "verdict.csv", "certificate.csv", "plan.png", "summary.json"}
STEPPED = {"rates.csv", "rates.png"}


def process(arguments, folder):
    """``python -m flatplan`` in a folder of its own."""
    environment = os.environ | {"PYTHONPATH": str(ROOT), "MPLBACKEND": "Agg", "PYTHONUTF8": "1"}
    return subprocess.run(
        [sys.executable, "-m", "flatplan", *arguments],
        cwd=folder,
        env=environment,
        capture_output=True,
        text=True,
        timeout=300,
        check=False,
    )


class Tags(HTMLParser):
    def __init__(self):
        super().__init__()
        self.seen, self.text = [], []

    def handle_starttag(self, tag, attrs):
        self.seen.append(tag)

    def handle_data(self, data):
        self.text.append(data)


@pytest.fixture
def quick(monkeypatch):
    """Pages and plots by stand-ins, where only the command line is looked at: drawing takes most of the time."""
    monkeypatch.setattr(planning, "report_html", lambda *things, title, scenario, **rest: f"{title}|{scenario}")
    monkeypatch.setattr(planning, "plot", lambda *things, **rest: None)
    monkeypatch.setattr(planning, "_png", lambda figure: b"\x89PNG\r\n\x1a\n")


@pytest.fixture
def write(tmp_path, monkeypatch):
    """Writes a case into an empty folder that the test then works in."""
    monkeypatch.chdir(tmp_path)

    def put(text, name="case.toml"):
        (tmp_path / name).write_text(text, encoding="utf-8")
        return name

    return put


def everything(folder):
    return {str(path.relative_to(folder)) for path in Path(folder).rglob("*")}


# --- the shipped example, as a process ----------------------------------------------------------------


@pytest.fixture(scope="module")
def shipped(tmp_path_factory):
    folder = tmp_path_factory.mktemp("shipped")
    return process(["plan", "example", "--into", "out"], folder), folder


def test_the_shipped_example_is_realizable_and_confirmed(shipped):
    done, folder = shipped
    assert done.returncode == 0, done.stderr
    assert everything(folder) == {"out", *(f"out/{name}" for name in ALWAYS | STEPPED)}
    assert "Traceback" not in done.stderr and "Warning" not in done.stderr
    assert "planning ..." in done.stderr and "confirming on the independent model ..." in done.stderr


def test_its_tables_have_units_and_numbers(shipped):
    _, folder = shipped
    rows = {
        name: list(csv.reader(io.StringIO((folder / "out" / name).read_text(encoding="utf-8"))))
        for name in sorted(ALWAYS | STEPPED)
        if name.endswith(".csv")
    }
    for name, table in rows.items():
        assert len(table) > 5, name
        assert {len(row) for row in table} == {len(table[0])}, name
    for name in ("channels.csv", "rates.csv"):
        head = rows[name][0]
        assert all("[" in column for column in head if column != "step"), head
        assert {"m³/h", "bar", "d", "m³"} <= {column.split("[")[1].rstrip("]") for column in head if "[" in column}
        for row in rows[name][1:]:
            assert all(float(value) == float(value) for value in row)
    # 16 d of moves and holds and 2 d more, in steps of 6 h; the volumes add up to what is stored
    assert len(rows["rates.csv"]) == 1 + 72
    volume = rows["rates.csv"][0].index("volume [m³]")
    case = parse_case(example_text(), "example.toml")
    assert sum(float(row[volume]) for row in rows["rates.csv"][1:]) == pytest.approx(case.medium.equilibrium(0.9e6).stored_volume, rel=1e-9)
    assert len(rows["verdict.csv"]) == 1 + 11


def test_its_summary_is_plain_json_in_si(shipped):
    _, folder = shipped
    said = json.loads(
        (folder / "out" / "summary.json").read_text(encoding="utf-8"), parse_constant=lambda word: pytest.fail(f"{word} is no JSON")
    )
    assert said["realizable"] is said["confirmed"] is True
    assert said["flatplan"] == flatplan.__version__
    assert said["duration_s"] == 18 * 86400.0
    assert said["target_error_Pa"] <= 1.5 and said["mass_balance"] <= 1e-10
    assert said["pumped_target_error_Pa"] <= 5e-3 * 1.5e6
    names = {f["name"]: f for f in said["findings"]}
    assert len(names) == 11 and names["max_rate"]["limit"] == pytest.approx(4.5 / 3600.0) and names["max_rate"]["holds"] is True
    assert set(said["tail"]) == set(said["rounding"]) >= {"injection_rate", "bottomhole_pressure"}


def test_its_pictures_and_page_are_whole(shipped):
    _, folder = shipped
    for name in ("plan.png", "rates.png"):
        data = (folder / "out" / name).read_bytes()
        assert data.startswith(b"\x89PNG\r\n\x1a\n") and data.endswith(b"IEND\xaeB`\x82") and len(data) > 10_000
    page = (folder / "out" / "report.html").read_text(encoding="utf-8")
    assert page.lower().startswith("<!doctype html>") and page.rstrip().endswith("</html>")
    tags = Tags()
    tags.feed(page)
    assert {"title", "table", "h1"} <= set(tags.seen) and "script" not in tags.seen
    assert parse_case(example_text(), "example.toml").title in "".join(tags.text)


def test_what_it_says_ends_in_the_cautions(shipped):
    done, _ = shipped
    lines = done.stdout.splitlines()
    assert lines[0] == parse_case(example_text(), "example.toml").title
    assert [line.strip() for line in lines[-len(CAUTIONS) :]] == list(CAUTIONS)
    body = done.stdout
    for words in (
        "  realizable: peak rate 4.057 m³/h",
        "confirmed on the independent model",
        "pumped in steps of 0.25 d",
        "written: report.html, ",
    ):
        assert words in body
    assert "NOT" not in body and body.index("written:") < body.index(CAUTIONS[0])


# --- in this process --------------------------------------------------------------------------------


def test_template_is_the_example_and_a_valid_case(capsys):
    assert main(["template"]) == 0
    text = capsys.readouterr().out
    assert text == example_text()
    assert parse_case(text, "mine.toml").limits == parse_case(example_text(), "example.toml").limits


def test_version_and_help(capsys):
    for arguments, words in (
        (["--version"], f"flatplan {flatplan.__version__}\n"),
        (["--help"], "exit codes: 0 realizable and confirmed; 1"),
    ):
        with pytest.raises(SystemExit) as stop:
            main(arguments)
        assert stop.value.code == 0
        assert words in capsys.readouterr().out


@pytest.mark.parametrize(
    "arguments", [[], ["plan"], ["plan", "a", "b"], ["--nothing"], ["template", "x"], ["plan", "example", "--unknown"]]
)
def test_a_command_that_is_none_is_bad_input(arguments, capsys):
    with pytest.raises(SystemExit) as stop:
        main(arguments)
    assert stop.value.code == 2
    assert "usage: flatplan" in capsys.readouterr().err


def test_plan_is_the_default_and_names_its_folder_by_the_case(write, quick, tmp_path, capsys):
    assert main([write(CASE)]) == 0
    assert everything(tmp_path) == {"case.toml", "case-plan", *(f"case-plan/{name}" for name in ALWAYS)}
    assert "written: report.html" in capsys.readouterr().out


def test_quiet_says_nothing(write, quick, tmp_path, capsys):
    assert main([write(CASE), "--quiet", "--into", "out"]) == 0
    assert capsys.readouterr() == ("", "")
    assert everything(tmp_path / "out") == ALWAYS
    assert main([write("x = 1"), "--quiet", "--into", "out2"]) == 2
    assert capsys.readouterr().err.startswith("flatplan: case.toml, line 1: x: is not a key here")


def test_a_second_run_overwrites_and_leaves_other_files_alone(write, quick, tmp_path):
    name = write(CASE)
    (tmp_path / "out").mkdir()
    (tmp_path / "out" / "notes.txt").write_text("mine")
    assert main([name, "--quiet", "--into", "out"]) == 0
    first = {path: (tmp_path / "out" / path).read_bytes() for path in ALWAYS}
    write(changed(("22.5 MPa", "22.4 MPa")))
    assert main([name, "--quiet", "--into", "out"]) == 0
    assert everything(tmp_path / "out") == ALWAYS | {"notes.txt"}
    assert (tmp_path / "out" / "notes.txt").read_text() == "mine"
    assert (tmp_path / "out" / "channels.csv").read_bytes() != first["channels.csv"]
    write(CASE)
    main([name, "--quiet", "--into", "out"])
    assert {path: (tmp_path / "out" / path).read_bytes() for path in ALWAYS} == first


def test_a_limit_that_fails_gives_1_and_every_file_and_the_reason(write, tmp_path, capsys):
    """The page and the plots themselves, in field units, with a title that would be markup and mathematics."""
    title = '<script>alert(1)</script> $x_{$ & \\"q\\"'
    text = changed(
        ('"A test"', f'"{title}"\nscenario = "<img src=x onerror=alert(2)>"'),
        ('"9 m^3/h"', '"2 m^3/h"'),
        ("[limits]", '[pumping]\nevery = "12 h"\n[output]\nunits = "field"\n[limits]'),
    )
    assert main(["plan", write(text), "--into", "deep/down/out"]) == 1
    out = capsys.readouterr().out
    folder = tmp_path / "deep" / "down" / "out"
    assert everything(folder) == ALWAYS | STEPPED
    assert "NOT realizable: peak rate" in out and "bbl/d" in out and "psi" in out and "bar" not in out.split("written:")[0]
    assert "fails: The largest injection rate is" in out and "instead of 3 d would do." in out
    assert [line.strip() for line in out.splitlines()[-len(CAUTIONS) :]] == list(CAUTIONS)
    page = (folder / "report.html").read_text(encoding="utf-8")
    assert "<script" not in page and "<img src=x" not in page
    assert "&lt;script&gt;alert(1)&lt;/script&gt;" in page and "&lt;img src=x onerror=alert(2)&gt;" in page
    said = json.loads((folder / "summary.json").read_text(encoding="utf-8"))
    assert said["realizable"] is False and said["confirmed"] is True
    assert said["peak_injection_rate_m3_per_s"] > 2.0 / 3600.0
    head = next(csv.reader(io.StringIO((folder / "rates.csv").read_text(encoding="utf-8"))))
    assert any("psi" in column for column in head) and any("bbl/d" in column for column in head)


@pytest.mark.parametrize(("system", "words"), [("SI", ("m³/s", "Pa")), ("metric", ("m³/h", "bar")), ("field", ("bbl/d", "psi"))])
def test_tables_in_every_unit_system(write, quick, tmp_path, system, words):
    assert main([write(changed(("[limits]", f'[output]\nunits = "{system}"\n[limits]'))), "--quiet", "--into", "out"]) == 0
    head = (tmp_path / "out" / "channels.csv").read_text(encoding="utf-8").splitlines()[0]
    assert all(f"[{unit}]" in head for unit in words)


def test_a_plan_that_is_not_confirmed_gives_1(write, quick, monkeypatch, capsys):
    """The model is led astray by a wrong tolerance of its judgement: nothing is that exact."""
    exact = planning.confirm
    monkeypatch.setattr(planning, "confirm", lambda subject: exact(subject, allowed=1e-300))
    assert main([write(CASE), "--into", "out"]) == 1
    assert "NOT confirmed on the independent model" in capsys.readouterr().out


@pytest.mark.parametrize("name", ["held face", "zones", "spherical"])
def test_other_sites_from_file_to_files(write, quick, tmp_path, capsys, name):
    assert main([write("".join(GOOD[name]) + '[pumping]\nevery = "12 h"\n'), "--into", "out"]) == 0
    assert everything(tmp_path / "out") == ALWAYS | STEPPED
    out = capsys.readouterr().out
    assert "confirmed on the independent model" in out
    assert ("target within" in out) and (("m³/h (" in out) == (name == "held face"))


# --- bad input: 2, one sentence, nothing written ------------------------------------------------------


def refused(arguments, folder, capsys):
    """Exit code 2, one sentence, and the folder is as before."""
    before = everything(folder)
    assert main(arguments) == 2
    said = capsys.readouterr()
    assert said.out == "" and "Traceback" not in said.err
    lines = [line for line in said.err.splitlines() if not line.endswith(" ...")]
    assert len(lines) == 1 and lines[0].startswith("flatplan: ") and lines[0].endswith("."), said.err
    assert everything(folder) == before
    return lines[0]


@pytest.mark.parametrize(
    ("change", "said"),
    [
        (("length =", "lenght ="), "flatplan: case.toml, line 5: [site] lenght: is not a key here; "),
        (('"140 m"', '"140 d"'), "flatplan: case.toml, line 5: [site] length: got '140 d', which is not a length; "),
        (("[site]", "[site"), "flatplan: case.toml: is not valid TOML: "),
        (('over = "3 d"', 'over = "3 d"\norder = 2.5'), "flatplan: case.toml, line 23: [target.stage] order: got 2.5; "),
        # what only the plan itself finds
        (("[limits]", "[plan]\ntolerance = 0.5\n[limits]"), "flatplan: case.toml, line 28: [plan] tolerance: got 0.5; "),
        (("[limits]", '[pumping]\nevery = "9 d"\n[limits]'), "flatplan: case.toml, line 28: [pumping] every: got "),
        (
            ("[target]", "[site.face]\nheld = true\n[target]"),
            "flatplan: case.toml, line 19: [target] target: its start is a pressure, but for this ",
        ),
        (('over = "3 d"', 'over = "10 min"'), "flatplan: case.toml, line 17: [target] target: at order 1.8 and an eased corner of "),
        (('"21 MPa"', '"0 L/s"'), "flatplan: case.toml, line 21: [target.stage] to: got '22.5 MPa', which is not a "),
    ],
)
def test_a_bad_case_writes_nothing(write, tmp_path, capsys, change, said):
    line = refused(["plan", write(changed(change)), "--into", "out"], tmp_path, capsys)
    assert line.startswith(said), line


def test_limits_that_a_held_face_cannot_have_are_refused(write, tmp_path, capsys):
    text = "".join(GOOD["held face"]) + '[limits]\nmax_rate = "3 m^3/h"\nmax_pressure_change = "20 kPa/h"\n'
    number = text.splitlines().index('max_pressure_change = "20 kPa/h"') + 1
    line = refused([write(text), "--into", "out"], tmp_path, capsys)
    assert line.startswith(f"flatplan: case.toml, line {number}: [limits] max_pressure_change: is stated, but ")


def test_files_that_are_no_case(write, tmp_path, capsys):
    assert "nothing.toml: cannot be read (No such file or directory)." in refused(["nothing.toml"], tmp_path, capsys)
    (tmp_path / "case.toml").write_bytes(b"\xff")
    assert refused(["case.toml"], tmp_path, capsys) == "flatplan: case.toml: is not UTF-8 text."
    (tmp_path / "case.toml").write_bytes(b"#" * 1_000_001)
    assert "is larger than 1000 kB" in refused(["case.toml"], tmp_path, capsys)


def test_a_folder_that_is_a_file(write, tmp_path, capsys):
    name = write(CASE)
    (tmp_path / "out").write_text("mine")
    assert refused([name, "--into", "out"], tmp_path, capsys) == "flatplan: --into: out is a file; it takes a folder."
    assert (tmp_path / "out").read_text() == "mine"


def test_a_folder_below_a_file(write, quick, tmp_path, capsys):
    name = write(CASE)
    (tmp_path / "out").write_text("mine")
    assert "flatplan: --into: out/sub cannot be written (" in refused([name, "--into", "out/sub"], tmp_path, capsys)


def test_a_folder_with_an_impossible_name(write, quick, tmp_path, capsys):
    line = refused([write(CASE), "--into", "x" * 5000], tmp_path, capsys)
    assert line.startswith("flatplan: --into: xxx") and "File name too long" in line and len(line) < 200


def test_a_folder_that_stands_where_a_file_goes(write, quick, tmp_path, capsys):
    name = write(CASE)
    (tmp_path / "out" / "report.html").mkdir(parents=True)
    line = refused([name, "--into", "out"], tmp_path, capsys)
    assert line.startswith("flatplan: --into: out cannot be written (") and "report.html" in line and "None" not in line


def test_an_error_while_writing_leaves_nothing_behind(write, quick, tmp_path, capsys, monkeypatch):
    """The disk fills up at the third file."""
    from flatplan.show import files

    name, real, count = write(CASE), files._write, []

    def full(temporary, data):
        count.append(temporary)
        if len(count) == 3:
            raise OSError(28, "No space left on device")
        real(temporary, data)

    monkeypatch.setattr(files, "_write", full)
    assert "--into: out cannot be written (No space left on device)." in refused([name, "--into", "out"], tmp_path, capsys)


def test_nothing_in_a_case_names_a_file(write, quick, tmp_path):
    """A title full of paths is only a title; all is written under the folder."""
    outside = tmp_path / "inside"
    outside.mkdir()
    os.chdir(outside)
    (outside / "case.toml").write_text(changed(('"A test"', '"../../evil/../../etc/x.html"')), encoding="utf-8")
    assert main(["case.toml", "--quiet", "--into", "out"]) == 0
    assert everything(tmp_path) == {"inside", "inside/case.toml", "inside/out", *(f"inside/out/{name}" for name in ALWAYS)}


def test_bad_input_as_a_process(tmp_path):
    (tmp_path / "case.toml").write_text(changed(("length =", "lenght =")), encoding="utf-8")
    done = process(["case.toml"], tmp_path)
    assert done.returncode == 2 and done.stdout == ""
    assert done.stderr.startswith("flatplan: case.toml, line 5: [site] lenght: is not a key here; ") and done.stderr.count("\n") == 1
    assert everything(tmp_path) == {"case.toml"}
