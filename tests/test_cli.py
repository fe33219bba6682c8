"""The command: what goes where, which exit status, and that everything is documented."""

from __future__ import annotations

import csv
import errno
import io
import json
import os
import re
import signal
import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace
from importlib.metadata import version
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy import constants
from scipy.io import mmread
from typer.main import get_command

from ribbon.cli import app, main
from ribbon.commands.output import ReaderGoneError, check_target, emit, json_text
from ribbon.commands.progress import Progress
from ribbon.errors import BadInput, NotCertified
from ribbon.lattice import shelf

ROOT = Path(__file__).resolve().parents[1]

ANNULENE = """\
title = "Möbius annulene"
[ribbon]
lattice = "square"
rows = 1
length = 16
half_twists = 1
orbital = "pz"
[hopping]
shells = [2.5]
[levels]
all = true
[sweep]
flux = { points = 5 }
[control]
compare = ["double"]
"""

Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "ring.toml").write_text(ANNULENE, encoding="utf-8")
    return tmp_path


@pytest.fixture
def run(here: Path, capsys: pytest.CaptureFixture[str]) -> Run:
    """Run the command in a folder with ring.toml; gives status, stdout and stderr."""

    def call(*arguments: str) -> tuple[int, str, str]:
        status = main(list(arguments))
        captured = capsys.readouterr()
        return status, captured.out, captured.err

    return call


def table(text: str) -> dict[str, np.ndarray]:
    rows = list(csv.DictReader(io.StringIO(text)))
    return {
        name: np.array([float(row[name] or "nan") for row in rows])
        for name in rows[0]
        if name not in {"shared", "holds"}
    }


def annulene(flux: float) -> np.ndarray:
    """E = -2 t cos(2 pi (n + 1/2 + flux)/16), Heilbronner 1964 at flux 0; t = 2.5 eV."""
    return np.sort(-5 * np.cos(2 * np.pi * (np.arange(16) + 0.5 + flux) / 16))


# answers


def test_alone_it_says_what_to_do_next(run):
    """`ribbon` without a verb is a question, not a mistake."""
    status, out, err = run()
    assert (status, err) == (0, "")
    assert "ribbon new" in out
    assert "ribbon study" in out
    assert len(out.splitlines()) < 12


def test_help_lists_every_verb(run):
    """All verbs, each with one line that is not cut short."""
    status, out, _ = run("--help")
    assert status == 0
    verbs = ("study", "describe", "levels", "flux", "edges", "continuum", "molecule")
    for verb in (*verbs, "export", "lattices", "new"):
        assert f"\n  {verb} " in out
    assert "..." not in out.partition("Commands:")[2]


def test_version_is_that_of_the_distribution(run):
    """The version comes from the installed distribution."""
    assert run("--version") == (0, version("halftwist") + "\n", "")


def test_lattices_lists_the_shelf(run):
    """Every shipped lattice with what it is."""
    status, out, err = run("lattices")
    assert (status, err) == (0, "")
    assert [line.split()[0] for line in out.splitlines()] == sorted(shelf())
    assert "rows count zigzag chains" in out


def test_levels_prints_the_table_alone_on_stdout(run):
    """Stdout is a CSV table of the exact levels; whatever else there is goes to stderr."""
    status, out, _ = run("levels", "ring.toml")
    found = table(out)
    assert status == 0
    assert list(found)[:2] == ["level", "energy"]
    np.testing.assert_array_equal(found["level"], np.arange(16))
    np.testing.assert_allclose(found["energy"], annulene(0.0), rtol=0, atol=1e-9)


def test_flux_tables_hold_the_exact_currents(run, here):
    """Levels and currents of the annulene, and their sums, against the closed form in A.

    I = -(e/h) dE/dphi for one electron, with e and h from CODATA through scipy.constants.
    """
    status, out, _ = run("flux", "ring.toml", "--totals", "totals.csv", "--set", "field.flux=0.1")
    assert status == 0
    found = table(out)
    assert list(found)[:5] == ["flux", "level", "energy", "current", "branch"]
    assert found["flux"].size == 5 * 16
    exact = np.concatenate([annulene(flux) for flux in np.linspace(0, 1, 5)])
    np.testing.assert_allclose(found["energy"], exact, rtol=0, atol=1e-9)
    ampere = constants.e**2 / constants.h
    at = found["flux"] == 0.25
    angle = 2 * np.pi * (np.arange(16) + 0.75) / 16
    order = np.argsort(-5 * np.cos(angle))
    slope = (5 * 2 * np.pi / 16 * np.sin(angle))[order]
    np.testing.assert_allclose(found["current"][at], -ampere * slope, rtol=0, atol=1e-12)
    totals = table((here / "totals.csv").read_text())
    assert list(totals)[:3] == ["flux", "current", "electrons"]
    np.testing.assert_allclose(totals["electrons"], 16, rtol=0, atol=1e-9)
    whole = -ampere * 2 * slope[:8].sum()
    np.testing.assert_allclose(totals["current"][1], whole, rtol=0, atol=1e-12)


@pytest.mark.parametrize("verb", ["levels", "flux", "edges", "continuum"])
def test_out_puts_the_same_table_into_a_file(run, here, verb):
    """With --out stdout stays empty, and the file holds what stdout would."""
    _, printed, _ = run(verb, "ring.toml")
    status, out, err = run(verb, "ring.toml", "--out", "table.csv")
    assert (status, out) == (0, "")
    assert "table.csv is written" in err
    assert (here / "table.csv").read_bytes() == printed.encode()
    assert sorted(path.name for path in here.iterdir()) == ["ring.toml", "table.csv"]


def test_out_writes_over_an_old_table_and_through_a_link(run, here):
    """A table of the same name is replaced; a link keeps pointing where it did."""
    (here / "real.csv").write_text("old")
    (here / "link.csv").symlink_to("real.csv")
    assert run("levels", "ring.toml", "--out", "link.csv")[0] == 0
    assert (here / "link.csv").is_symlink()
    assert (here / "real.csv").read_text().startswith("level,energy")


@pytest.mark.parametrize("verb", ["levels", "flux", "describe"])
def test_json_is_valid_and_alone_on_stdout(run, verb):
    """Strict JSON: no NaN, no Infinity; levels and flux bring their checks, all passed."""

    def refuse(token: str) -> None:
        raise AssertionError(token)

    status, out, _ = run(verb, "ring.toml", "--json")
    told = json.loads(out, parse_constant=refuse)
    assert status == 0
    if verb == "describe":
        assert told["sites"] == 16
        assert told["orientable"] is False
        return
    assert told["unit"] == "eV"
    assert told["title"] == "Möbius annulene"
    assert len(told["checks"]) >= 3
    assert all(check["passed"] for check in told["checks"])
    assert {"name", "value", "limit", "flux", "note"} <= set(told["checks"][0])


def test_json_and_csv_tell_the_same(run, here):
    """The records of the JSON answer are the rows of the table."""
    _, out, _ = run("flux", "ring.toml", "--json", "--out", "flux.csv", "--totals", "totals.csv")
    told = json.loads(out)
    for key, name in (("flux", "flux.csv"), ("totals", "totals.csv")):
        rows = list(csv.DictReader(io.StringIO((here / name).read_text())))
        assert len(told[key]) == len(rows)
        assert float(rows[2]["current"]) == told[key][2]["current"]
    assert told["current_unit"] == "A"


def test_describe_says_the_same_in_words(run):
    """One line for each thing, names in front."""
    status, out, _ = run("describe", "ring.toml")
    lines = dict(line.split("  ", 1) for line in out.splitlines())
    assert status == 0
    assert lines["sites"].strip() == "16"
    assert lines["orientable"].strip() == "no"


def test_quiet_says_nothing_on_stderr(run):
    """With --quiet only errors are heard."""
    for arguments in (["levels", "ring.toml"], ["flux", "ring.toml", "--out", "x.csv"]):
        assert run(*arguments, "--quiet")[2] == ""


def test_study_prints_its_checks_and_where_the_report_is(run, here):
    """The last line is the report; every other line is a check that passed."""
    status, out, _ = run("study", "ring.toml", "--out", "result")
    *checks, last = out.splitlines()
    assert status == 0
    assert last == "result/report.html"
    assert (here / last).stat().st_size > 1000
    assert len(checks) > 5
    assert all(line.startswith("pass  ") for line in checks)


def test_a_band_filled_to_the_brim_is_studied_too(run, here):
    """With one electron a site and one a level there is no empty level, and still a report."""
    options = ["--set", "sweep.spin=1", "--set", "control.compare=[]", "--quiet"]
    assert run("study", "ring.toml", *options) == (0, "ring-study/report.html\n", "")


def test_a_study_folder_reruns_by_itself(run, here):
    """The folder holds the lattice file and site table it needs."""
    (here / "own.toml").write_text(shelf()["square"].read_text())
    (here / "sites.csv").write_text("site,energy\n" + "".join(f"{i},0.{i}\n" for i in range(16)))
    options = ["--set", "ribbon.lattice=own.toml", "--set", "hopping.site_table=sites.csv"]
    study = run("study", "ring.toml", *options, "--quiet", "--set", "control.compare=[]")
    assert study == (0, "ring-study/report.html\n", "")
    _, first, _ = run("levels", "ring.toml", *options)
    (here / "own.toml").unlink()
    (here / "sites.csv").unlink()
    status, again, _ = run("levels", "ring-study/study.toml")
    assert status == 0
    assert again == first


@pytest.mark.parametrize("name", sorted(shelf()))
def test_new_writes_a_file_that_can_be_described(run, here, name):
    """From nothing to a description in two commands, for each lattice."""
    status, out, err = run("new", "mine.toml", "--lattice", name)
    assert (status, out) == (0, "")
    assert "ribbon describe mine.toml" in err
    status, out, _ = run("describe", "mine.toml", "--json")
    assert status == 0
    assert json.loads(out)["boundary_loops"] == 1


def test_export_writes_the_matrix_that_others_can_read(run, here):
    """The exported matrix, read back by scipy, has the levels of the closed form."""
    assert run("export", "ring.toml", "ring.mtx") == (0, "", "ring.mtx is written\n")
    levels = np.linalg.eigvalsh(mmread(here / "ring.mtx").toarray())
    np.testing.assert_allclose(levels, annulene(0.0), rtol=0, atol=1e-9)


def test_notes_go_to_stderr(run):
    """What a reader should know beside the table is not in the table."""
    size = ["--set", "ribbon.length_nm=16.2"]
    status, out, err = run("levels", "ring.toml", *size)
    assert status == 0
    assert out.startswith("level,energy")
    assert err.startswith("note: length_nm = 16.2: ")
    told = json.loads(run("describe", "ring.toml", "--json", *size)[1])
    size_note, way_note, gap_note = (line.removeprefix("note: ") for line in err.splitlines())
    assert way_note.startswith("method: symmetry")
    assert told["notes"] == [size_note]
    assert gap_note.startswith("gap at 16 electrons")


# exit statuses


def test_totals_that_do_not_fit_are_refused_where_they_were_asked_for(run, here, monkeypatch):
    """Without totals the table of levels is still given, but --totals cannot be."""
    import ribbon.study.run as study_run  # noqa: PLC0415

    whole = study_run.run_flux

    def bare(*args: Any, **kwargs: Any) -> Any:
        result = whole(*args, **kwargs)
        response = replace(result.ribbon.response, totals=None)
        case = replace(result.ribbon, response=response)
        return replace(result, cases=(case,), notes=("totals are left out: too large",))

    monkeypatch.setattr(study_run, "run_flux", bare)
    status, out, err = run("flux", "ring.toml", "--totals", "totals.csv")
    assert (status, out, err) == (2, "", "ribbon: totals are left out: too large\n")
    assert not (here / "totals.csv").exists()
    told = json.loads(run("flux", "ring.toml", "--json")[1])
    assert told["totals"] is None
    assert len(told["flux"]) == 5 * 16


def test_an_answer_in_doubt_is_written_and_gets_status_3(run, here, monkeypatch):
    """A check that fails: the table is there, the sentence names the check, the status is 3."""
    import ribbon.study.run as study_run  # noqa: PLC0415

    whole = study_run.run_levels

    def doubtful(*args: Any, **kwargs: Any) -> Any:
        result = whole(*args, **kwargs)
        failed = replace(result.checks[0], passed=False, value=2.0, limit=1.0)
        return replace(result, checks=(failed, *result.checks[1:]))

    monkeypatch.setattr(study_run, "run_levels", doubtful)
    status, out, err = run("levels", "ring.toml", "--out", "x.csv", "--quiet")
    assert (status, out) == (3, "")
    assert "1 of " in err
    assert "(2 above 1)" in err
    assert err.count("\n") == 1
    assert len((here / "x.csv").read_text().splitlines()) == 17


def test_a_partial_answer_is_written_and_gets_status_3(run, here, monkeypatch):
    """What is known is written; then the sentence says what is missing."""
    import ribbon.study.run as study_run  # noqa: PLC0415

    whole = study_run.run_levels

    def partial(*args: Any, **kwargs: Any) -> Any:
        raise NotCertified("two levels are missing", whole(*args, **kwargs))

    monkeypatch.setattr(study_run, "run_levels", partial)
    status, out, err = run("levels", "ring.toml", "--quiet")
    assert (status, err) == (3, "ribbon: two levels are missing\n")
    assert len(out.splitlines()) == 17


@pytest.mark.parametrize(
    ("problem", "status", "words"),
    [
        (NotCertified("nothing is certain"), 3, "ribbon: nothing is certain\n"),
        (KeyboardInterrupt(), 130, "ribbon: interrupted\n"),
        (MemoryError(), 2, "ribbon: there is not enough memory"),
        (PermissionError(13, "Permission denied", "place"), 2, "ribbon: place: Permission denied"),
        (OSError("odd"), 2, "ribbon: odd\n"),
    ],
)
def test_problems_while_computing(run, here, monkeypatch, problem, status, words):
    """Each problem gets its status and one line, and leaves no file."""
    import ribbon.study.run as study_run  # noqa: PLC0415

    def fail(*_: Any, **__: Any) -> None:
        raise problem

    monkeypatch.setattr(study_run, "run_levels", fail)
    found, out, err = run("levels", "ring.toml", "--out", "x.csv")
    assert (found, out) == (status, "")
    assert err.startswith(words)
    assert err.count("\n") == 1
    assert [path.name for path in here.iterdir()] == ["ring.toml"]


def test_a_mistake_of_ours_is_not_dressed_up(run, monkeypatch):
    """A bug keeps its traceback: it must not look like bad input."""
    import ribbon.study.run as study_run  # noqa: PLC0415

    monkeypatch.setattr(study_run, "run_levels", lambda *_, **__: 1 / 0)
    with pytest.raises(ZeroDivisionError):
        run("levels", "ring.toml")


# the process as the shell sees it


def shell(script: str, here: Path) -> subprocess.CompletedProcess[str]:
    """Run a shell script in which $RIBBON is the command; stdout and stderr are kept."""
    environment = {
        **os.environ,
        "RIBBON": f"{sys.executable} -W error -m ribbon.cli",
        "PYTHONPATH": os.pathsep.join(sys.path),
        "LC_ALL": "C",
        "PYTHONUTF8": "0",
        "PYTHONIOENCODING": "ascii",
    }
    return subprocess.run(
        ["bash", "-c", f"set -o pipefail; {script}"],
        cwd=here,
        env=environment,
        capture_output=True,
        text=True,
        timeout=180,
        check=False,
    )


def test_a_reader_that_leaves_early_is_no_error(here):
    """`ribbon ... | head -1` ends in silence; so does a reader that is gone from the start."""
    done = shell("$RIBBON flux ring.toml --quiet --set sweep.flux.points=301 | head -1", here)
    assert (done.returncode, done.stderr) == (0, "")
    assert done.stdout.startswith("flux,level,energy")
    done = shell("$RIBBON --help | true; $RIBBON | true", here)
    assert "Traceback" not in done.stderr
    assert "Exception ignored" not in done.stderr


def test_a_full_or_closed_stdout_is_told(here):
    """Nothing is lost in silence: a full device and a closed stdout are errors."""
    done = shell("$RIBBON lattices > /dev/full; echo $?; $RIBBON lattices >&-; echo $?", here)
    assert done.stdout.split() == ["2", "2"]
    first, second = done.stderr.splitlines()
    assert first == "ribbon: standard output cannot be written (No space left on device)"
    assert second == "ribbon: standard output is closed; there is nowhere to print to"


def test_letters_a_terminal_cannot_show_are_escaped(here):
    """A title with umlauts in a plain ASCII locale does not end in a traceback."""
    done = shell("$RIBBON levels ring.toml --json --quiet", here)
    assert done.returncode == 0
    assert "M\\xf6bius" in done.stdout or "M\\u00f6bius" in done.stdout


def test_an_interrupt_ends_with_130_and_leaves_nothing(here):
    """Ctrl-C in the middle of a long study: one line, status 130, no folder, no part of one."""
    script = (
        "import threading, signal, os, sys\n"
        "import ribbon.study.run, ribbon.study.folder\n"
        "from ribbon.cli import main\n"
        "threading.Timer(0.5, lambda: os.kill(os.getpid(), signal.SIGINT)).start()\n"
        "sys.exit(main(['study', 'ring.toml', '--set', 'ribbon.rows=3',\n"
        "    '--set', 'ribbon.length=60', '--set', 'disorder.strength=1.0',\n"
        "    '--set', 'sweep.flux.points=5001']))\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", script],
        cwd=here,
        env={**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)},
        capture_output=True,
        text=True,
        timeout=180,
        check=False,
    )
    assert done.returncode == 128 + signal.SIGINT
    assert done.stderr.splitlines()[-1] == "ribbon: interrupted"
    assert "Traceback" not in done.stderr
    assert [path.name for path in here.iterdir()] == ["ring.toml"]


HEAVY = ["numpy", "scipy", "networkx", "pydantic", "rich", "matplotlib", "xarray", "pandas", "h5py"]


def test_help_loads_nothing_heavy(here):
    """What `ribbon --help` imports is what it takes; the libraries that compute are not in it."""
    script = (
        "import sys\nfrom ribbon.cli import main\nmain(['--help'])\n"
        f"print([name for name in {HEAVY} if name in sys.modules], file=sys.stderr)"
    )
    done = subprocess.run(
        [sys.executable, "-c", script],
        env={**os.environ, "PYTHONPATH": os.pathsep.join(sys.path)},
        capture_output=True,
        text=True,
        timeout=180,
        check=True,
    )
    assert done.stderr == "[]\n"


# small parts


def test_numbers_that_are_not_finite_become_null_at_any_depth():
    """JSON has no NaN and no Infinity, also inside arrays and records."""
    value = {1: np.array([1.0, np.nan]), "a": (np.float64(np.inf), np.int64(3), None, True)}
    assert json.loads(json_text(value)) == {"1": [1.0, None], "a": [None, 3, None, True]}


class Writer(io.StringIO):
    """A stdout that fails like a pipe without reader, or a full disk."""

    def __init__(self, problem: OSError) -> None:
        super().__init__()
        self.problem = problem

    def flush(self) -> None:
        raise self.problem


def test_emit_tells_a_lost_reader_from_a_full_disk(monkeypatch):
    """A reader that left is no error; a disk that is full is; so is no stdout at all."""
    monkeypatch.setattr(sys, "stdout", Writer(BrokenPipeError()))
    with pytest.raises(ReaderGoneError):
        emit("text")
    monkeypatch.setattr(sys, "stdout", Writer(OSError(errno.ENOSPC, "No space")))
    with pytest.raises(BadInput, match=r"standard output cannot be written \(No space\)"):
        emit("text")
    monkeypatch.setattr(sys, "stdout", None)
    with pytest.raises(BadInput, match="standard output is closed"):
        emit("text")


def test_a_reader_that_is_gone_ends_the_command_in_silence(run, monkeypatch):
    """No word and status 0, for answers and for the help text of the command library."""
    monkeypatch.setattr(sys, "stdout", Writer(BrokenPipeError(errno.EPIPE, "Broken pipe")))
    assert main(["lattices"]) == 0
    assert main(["--help"]) == 0


def test_an_unwritable_folder_is_told_before_anything_is_computed(tmp_path, monkeypatch):
    """The superuser may write anywhere, so the system's answer is made here."""
    monkeypatch.setattr(os, "access", lambda path, mode: mode != os.W_OK)
    with pytest.raises(BadInput, match=r"the folder .* cannot be written to"):
        check_target(tmp_path / "x.csv")


def test_progress_waits_a_second_then_says_where_it_is(capsys, monkeypatch):
    """Short work is silent; long work says its stage and fraction, and not too often."""
    now = iter([0.0, 0.5, 1.5, 2.0, 20.0])
    monkeypatch.setattr("ribbon.commands.progress.time.monotonic", lambda: next(now))
    with Progress() as progress:
        progress("one", 0.1)
        assert capsys.readouterr().err == ""
        progress("two", 0.25)
        assert capsys.readouterr().err == "ribbon: two, 25 % (2 s)\n"
        progress("two", 0.3)
        assert capsys.readouterr().err == ""
        progress("three")
        assert capsys.readouterr().err == "ribbon: three (20 s)\n"


def test_progress_draws_a_live_line_on_a_terminal(capsys, monkeypatch):
    """On a terminal the line moves, and it is gone at the end."""
    monkeypatch.setattr("ribbon.commands.progress.PATIENCE", 0.0)
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True, raising=False)
    with Progress() as progress:
        progress("counting", 0.5)
        progress("counting")
    assert "counting" in capsys.readouterr().err


# documentation


def words_of_the_command() -> list[str]:
    command: Any = get_command(app)
    words = [f"ribbon {name}" for name in command.commands]
    for entry in (command, *command.commands.values()):
        for parameter in entry.params:
            words += [word for word in parameter.opts if word.startswith("--")]
    return sorted(set(words))


@pytest.mark.parametrize("word", words_of_the_command())
def test_every_command_and_option_is_documented(word):
    """A verb or option that README.md and DEVELOPERS.md do not name does not exist for a reader."""
    text = "".join((ROOT / name).read_text("utf-8") for name in ("README.md", "DEVELOPERS.md"))
    assert re.search(rf"(?<![\w-]){word}(?![\w-])", text), f"{word} is not documented"


def test_a_sweep_that_cannot_be_certified_ends_with_status_three(
    run: Any, monkeypatch: pytest.MonkeyPatch
) -> None:
    """One sentence that names the sweep, no traceback."""

    def doubtful(*_: Any, **__: Any) -> None:
        raise NotCertified("the window holds 3 levels, but the iteration found 2")

    monkeypatch.setattr("ribbon.study.cases.sweep_flux", doubtful)
    status, out, err = run("flux", "ring.toml")
    assert status == 3
    assert not out
    assert "flux sweep" in err


def test_levels_without_a_certified_gap_are_written_all_the_same(
    run: Any, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Exit status 3 keeps what is known: the levels stand, the gap is null, a check fails."""

    def doubtful(*_: Any, **__: Any) -> None:
        raise NotCertified("the frontier holds 2 levels, but the iteration found 1")

    monkeypatch.setattr("ribbon.study.cases.find_gap", doubtful)
    status, out, err = run("levels", "ring.toml", "--json")
    assert status == 3
    told = json.loads(out)
    assert told["levels"]
    assert told["gap"]["gap"] is None
    assert "not certified" in err
    assert "the frontier holds" in str(told["checks"])


WIDE = ["--set", "ribbon.rows=5", "--set", "ribbon.length=8", "--set", "levels.all=true"]


def test_edges_prints_the_promised_columns(run: Any) -> None:
    """Weights lie between 0 and 1, and participation between 1 and the number of sites."""
    status, out, _ = run("edges", "ring.toml", *WIDE)
    found = table(out)
    assert status == 0
    assert list(found)[:4] == ["level", "energy", "edge_weight", "decay_length"]
    assert found["level"].size == 40
    assert np.all((found["edge_weight"] > 0) & (found["edge_weight"] <= 1 + 1e-12))
    assert np.all((found["participation"] >= 1 - 1e-9) & (found["participation"] <= 40 + 1e-9))


def test_edges_as_json_tell_the_loops(run: Any) -> None:
    """A one-sided ribbon has one edge that runs round twice."""
    status, out, _ = run("edges", "ring.toml", *WIDE, "--json")
    told = json.loads(out)
    assert status == 0
    assert [loop["winding"] for loop in told["loops"]] == [2]
    # the square lattice has a spacing of 1 nm unless the file says another
    assert told["loops"][0]["length_nm"] == pytest.approx(2 * 8 * 1.0, abs=1e-12)
    assert told["edges"][0]["level"] == 0
    assert all(check["passed"] for check in told["checks"])


def test_edges_need_states_that_fit(run: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    """Where the states would be too large one sentence says what would fit."""
    monkeypatch.setattr("ribbon.study.cases.MOST_KEPT", 100)
    status, out, err = run("edges", "ring.toml", *WIDE)
    assert (status, out) == (2, "")
    assert "levels.count" in err


def test_continuum_prints_levels_of_the_matrix(run: Any) -> None:
    """Its energies are those of `levels`; the error is counted from the band bottom."""
    status, out, _ = run("continuum", "ring.toml", *WIDE)
    found = table(out)
    assert status == 0
    assert list(found)[:5] == ["level", "energy", "continuum", "extrapolated", "relative_error"]
    _, levels, _ = run("levels", "ring.toml", *WIDE)
    np.testing.assert_array_equal(found["energy"], table(levels)["energy"])
    bottom = -4 * 2.5
    error = (found["energy"] - found["continuum"]) / (found["continuum"] - bottom)
    np.testing.assert_allclose(found["relative_error"], error, rtol=0, atol=1e-12)


@pytest.mark.parametrize(
    ("change", "word"),
    [
        ("ribbon.lattice=triangular", "no continuum formula"),
        ("disorder.strength=1.0", "clean rings"),
        ("hopping.shells=[2.5, 0.1]", "first neighbours only"),
    ],
)
def test_continuum_refuses_what_has_no_formula(run: Any, change: str, word: str) -> None:
    """One sentence says why."""
    status, out, err = run("continuum", "ring.toml", *WIDE, "--set", change)
    assert (status, out) == (2, "")
    assert word in err
    assert len(err.splitlines()) == 1
