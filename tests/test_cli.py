"""The command line: help, wrong calls, what each error ends with, and what reaches the two streams."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest
import typer

from safecheck import cli
from safecheck.errors import (
    CannotEncode,
    CodecUnavailable,
    CorruptCode,
    DocumentError,
    DossierError,
    Interrupted,
    RegionError,
    ResumeMismatch,
    SafecheckError,
    UsageError,
    WorkerLost,
)
from safecheck.policy.conditions import ExitCondition
from safecheck.wording import lint
from synthetic_studies import ct_body
from tests.end_to_end.command import command_line, environment_of, run
from tests.end_to_end.hospital import CANDIDATES, CHANGE, CHOSEN, limit

HELP_S = 0.5
COMMANDS = [command.callback.__name__ for command in cli.app.registered_commands if command.callback is not None]


@pytest.fixture(scope="module")
def place(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with a small study and files that are no good."""
    folder = tmp_path_factory.mktemp("cli")
    ct_body(folder / "in", seed=1, rows=64, columns=64, slices=1)
    (folder / "binary").write_bytes(b"\x00\xff" * 100)
    (folder / "words.toml").write_text("these are = = words", encoding="utf-8")
    (folder / "words.json").write_text('{"version": 1, "regions": [{"label": 3}]}', encoding="utf-8")
    (folder / "plan.toml").write_text(CHANGE + CHOSEN + CANDIDATES, encoding="utf-8")
    (folder / "full").mkdir()
    (folder / "full" / "file").write_text("x", encoding="utf-8")
    (folder / "open.key").write_text("00" * 32, encoding="utf-8")
    (folder / "open.key").chmod(0o644)
    return folder


def call(monkeypatch: pytest.MonkeyPatch, *arguments: str) -> int:
    """Exit code of the command line in this process."""
    monkeypatch.setattr(sys, "argv", ["safecheck", *arguments])
    with pytest.raises(SystemExit, match=r"^\d+$") as left:
        cli.main()
    return int(str(left.value.code))


@pytest.mark.skipif(not hasattr(os, "wait4"), reason="times of child processes are told by POSIX systems only")
def test_help_takes_less_than_half_a_second_of_processor_time() -> None:
    times = []
    for _ in range(3):
        process = subprocess.Popen(command_line("--help"), env=environment_of(), stdout=subprocess.DEVNULL)
        _, status, usage = os.wait4(process.pid, 0)
        process.returncode = os.waitstatus_to_exitcode(status)
        assert process.returncode == 0
        times.append(usage.ru_utime + usage.ru_stime)
    assert min(times) < HELP_S


def test_help_says_that_0_is_no_finding(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    assert call(monkeypatch, "--help") == 0
    text = " ".join(capsys.readouterr().out.split())
    assert "no finding on fitness for any use" in text
    for code in ExitCondition:
        assert f"{int(code)} " in text
    assert list(lint(text)) == []


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_has_help(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], command: str
) -> None:
    assert call(monkeypatch, command, "--help") == 0
    captured = capsys.readouterr()
    assert captured.err == ""
    lines = [line for line in captured.out.splitlines() if line.strip()]
    assert len(lines[1].strip()) > 20, captured.out
    assert list(lint(captured.out)) == []


def test_all_commands_are_there() -> None:
    assert set(COMMANDS) >= {"assess", "census", "demo", "lookup", "report", "selftest", "transforms", "verify"}


WRONG = [
    (["--bogus"], "No such option"),
    (["bogus"], "No such command"),
    (["assess"], "Missing argument"),
    (["assess", "in"], "no dossier is named"),
    (["assess", "nowhere", "--out", "d"], "1 of the paths given do not exist"),
    (["assess", "in", "--delivered", "nowhere", "--out", "d"], "1 of the paths given do not exist"),
    (["assess", "in", "--out", "d", "--codecs", "bogus"], "bogus"),
    (["assess", "in", "--out", "d", "--codecs", "jpegls-reversible"], "jpegls-reversible"),
    (["assess", "in", "--out", "d", "--codecs", ""], "at least one ratio and one codec"),
    (["assess", "in", "--out", "d", "--codecs", "tiled,tiled"], "twice"),
    (["assess", "in", "--out", "d", "--ratios", "ten"], "numbers with commas"),
    (["assess", "in", "--out", "d", "--ratios", ""], "at least one ratio and one codec"),
    (["assess", "in", "--out", "d", "--ratios", "5,5"], "twice"),
    (["assess", "in", "--out", "d", "--ratios", "1"], "above 1 and at most 1000"),
    (["assess", "in", "--out", "d", "--ratios", "-5"], "above 1 and at most 1000"),
    (["assess", "in", "--out", "d", "--ratios", "nan"], "above 1 and at most 1000"),
    (["assess", "in", "--out", "d", "--ratios", "inf"], "above 1 and at most 1000"),
    (["assess", "in", "--out", "d", "--workers", "0"], "--workers"),
    (["assess", "in", "--out", "d", "--workers", "two"], "--workers"),
    (["assess", "in", "--out", "binary"], "the dossier's folder cannot be used"),
    (["assess", "in", "--out", "full"], "the folder is not empty"),
    (["assess", "in", "--out", "d", "--plan", "nowhere"], "plan file"),
    (["assess", "in", "--out", "d", "--plan", "in"], "the plan file cannot be read"),
    (["assess", "in", "--out", "d", "--plan", "binary"], "the plan file cannot be read"),
    (["assess", "in", "--out", "d", "--plan", "words.toml"], "TOML"),
    (["assess", "in", "--out", "d", "--plan", "plan.toml", "--ratios", "5"], "--plan declares the candidates"),
    (["assess", "in", "--out", "d", "--regions", "nowhere"], "the region file cannot be read"),
    (["assess", "in", "--out", "d", "--regions", "words.json"], "regions[0]"),
    (["assess", "in", "--out", "d", "--regions", "binary"], "region"),
    (["assess", "in", "--out", "d", "--key", "in"], "the site key cannot be read"),
    (["assess", "in", "--out", "d", "--key", "binary"], "the site key file"),
    (["assess", "in", "--out", "d", "--key", "open.key"], "can be read by others"),
    (["census"], "Missing argument"),
    (["census", "nowhere"], "do not exist"),
    (["census", "in", "--draft-plan", "plan.toml"], "exists already"),
    (["census", "in", "--draft-plan", "nowhere/plan.toml"], "cannot be written"),
    (["demo", "--out", "full"], "is not empty"),
    (["demo", "--out", "binary"], "--out"),
    (["report", "nowhere", "--out", "r.pdf"], "no such dossier"),
    (["report", "full"], "--out"),
    (["verify", "nowhere"], "no such dossier"),
    (["verify", "binary"], "no such dossier"),
    (["verify", "in", "--frames", "0"], "--frames"),
    (["lookup", "P-00000-00000"], "Missing argument"),
    (["transforms"], "Missing argument"),
    (["transforms", "in"], "Missing option '--out'"),
    (["transforms", "nowhere", "--out", "d"], "1 of the paths given do not exist"),
    (["transforms", "in", "--out", "full"], "the folder of --out is not empty"),
    (["transforms", "in", "--out", "binary"], "the folder of --out cannot be used"),
    (["transforms", "in", "--out", "binary/d"], "the folder of --out cannot be used"),
    (["transforms", "in", "--out", "in/d"], "would lie among the images"),
    (["transforms", "in", "--out", "d", "--frames", "0"], "--frames"),
    (["transforms", "in", "--out", "d", "--frames", "many"], "--frames"),
    (["transforms", "in", "--out", "d", "--regions", "nowhere"], "the region file cannot be read"),
    (["transforms", "in", "--out", "d", "--regions", "words.json"], "regions[0]"),
    (["transforms", "in", "--out", "d", "--regions", "binary"], "region"),
    (["transforms", "in", "--out", "d", "--key", "in"], "the site key cannot be read"),
    (["transforms", "in", "--out", "d", "--basis", "8"], "do not exist"),
]


@pytest.mark.parametrize(("arguments", "said"), WRONG, ids=[" ".join(arguments) for arguments, _ in WRONG])
def test_a_wrong_call_ends_with_2_and_one_sentence(
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
    place: Path,
    arguments: list[str],
    said: str,
) -> None:
    monkeypatch.chdir(place)
    monkeypatch.setenv("XDG_CONFIG_HOME", str(place / "config"))
    quiet = ["-q"] if arguments[0] in ("assess", "census", "demo", "transforms") else []
    assert call(monkeypatch, *arguments, *quiet) == 2
    captured = capsys.readouterr()
    # A census that was taken is shown even where its draft cannot be written.
    assert captured.out == "" or "nowhere/plan.toml" in arguments
    assert said in captured.err
    assert captured.err.startswith("safecheck: ")
    assert captured.err.count("\n") == 1
    assert str(place) not in captured.err
    assert not (place / "d" / "record.json").exists()


PLANS = [
    (CHANGE + CHOSEN + CANDIDATES.replace("jpeg2000", "bogus"), "candidates[0].codec"),
    (CHANGE + CHOSEN + CANDIDATES.replace("ratio = 5", "ratio = 0.5"), "candidates[0].ratio"),
    (CHANGE + CHOSEN + CANDIDATES.replace("ratio = 5", "ration = 5"), "candidates[0].ratio"),
    (CHANGE + CHOSEN + CANDIDATES + limit(5).replace('unit = "HU"\n', ""), "limits[0].unit"),
    (CHANGE + CHOSEN + CANDIDATES + limit(5).replace("rmse_content", "psnr_peak_bits_db"), "limits[0].unit"),
    (CHANGE + CHOSEN + CANDIDATES + limit(5).replace("rmse_content", "beauty"), "limits[0].measure"),
    (CHANGE + CHOSEN + CANDIDATES + limit(5).replace("at_most = 5\n", ""), "limits[0]"),
    (CHANGE.replace('declared_by = "medical physicist"\n', "") + CHOSEN + CANDIDATES, "change.declared_by"),
    (CHANGE.replace("version = 1", "version = 2") + CHOSEN + CANDIDATES, "version"),
    (CHANGE + CHOSEN.replace("chosen", "nicely") + CANDIDATES, "sample.drawn"),
    (CHANGE + CHOSEN + CANDIDATES + "[extra]\nkey = 1\n", "extra"),
    (CHANGE + CHOSEN + "[claim]\nexceeding_at_most_percent = 0\n" + CANDIDATES, "claim.exceeding_at_most_percent"),
]


@pytest.mark.parametrize(("text", "path"), PLANS, ids=[path for _, path in PLANS])
def test_a_wrong_plan_ends_with_2_and_names_the_dotted_path(
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
    place: Path,
    tmp_path: Path,
    text: str,
    path: str,
) -> None:
    (tmp_path / "plan.toml").write_text(text, encoding="utf-8")
    arguments = ("--plan", str(tmp_path / "plan.toml"), "--out", str(tmp_path / "d"), "--key", str(tmp_path / "key"))
    assert call(monkeypatch, "assess", str(place / "in"), *arguments) == 2
    captured = capsys.readouterr()
    assert captured.err.startswith(f"safecheck: {path}")
    assert captured.err.count("\n") == 1
    assert not (tmp_path / "d").exists()


def raising(error: BaseException) -> Callable[[], object]:
    def raise_it() -> object:
        raise error

    return raise_it


CODES = [
    (UsageError("sentence"), 2),
    (DocumentError("limits[0].unit", "sentence"), 2),
    (ResumeMismatch("sentence"), 2),
    (typer.BadParameter("sentence"), 2),
    (Interrupted("sentence"), 5),
    (KeyboardInterrupt(), 5),
    (DossierError("sentence"), 6),
    (CannotEncode("sentence"), 8),
    (CodecUnavailable("sentence"), 8),
    (CorruptCode("sentence"), 8),
    (RegionError("sentence"), 8),
    (WorkerLost("sentence"), 8),
    (RuntimeError("Doe^Jane"), 8),
    (OSError(28, "no space", "/doe/jane"), 8),
    (MemoryError(), 8),
    (RecursionError("Doe^Jane"), 8),
]


@pytest.mark.parametrize(("error", "code"), CODES, ids=[type(error).__name__ for error, _ in CODES])
def test_every_error_has_its_code_and_is_never_1(
    capsys: pytest.CaptureFixture[str], error: BaseException, code: int
) -> None:
    assert cli._guarded(raising(error)) == code != 1
    said = capsys.readouterr().err
    assert said.count("\n") == 1
    assert "doe" not in said.lower()


def test_the_whole_tree_of_errors_has_a_code() -> None:
    def below(kind: type[SafecheckError]) -> set[type[SafecheckError]]:
        return {kind}.union(*(below(each) for each in kind.__subclasses__()))

    known = {type(error) for error, _ in CODES}
    # What is left out of a run is counted in the record and reaches nobody as an error.
    missing = {kind.__name__ for kind in below(SafecheckError) if not kind.__subclasses__()} - {
        kind.__name__ for kind in known
    }
    assert missing == {"InputExcluded", "InputRefused"}


def test_an_internal_error_of_a_job_ends_with_8_without_its_text(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], place: Path
) -> None:
    def break_down(*_: object, **__: object) -> object:
        raise KeyError("Doe^Jane")

    monkeypatch.setattr("safecheck.jobs.census.take_census", break_down)
    assert call(monkeypatch, "census", str(place / "in")) == 8
    assert capsys.readouterr().err == "safecheck: internal error (KeyError)\n"


def test_without_a_command_help_is_shown(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    assert call(monkeypatch) in (0, 2)
    captured = capsys.readouterr()
    assert "census" in captured.out + captured.err


def test_the_version_is_one_line(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    from safecheck import __version__

    assert call(monkeypatch, "--version") == 0
    assert capsys.readouterr().out == f"{__version__}\n"


def test_lookup_is_refused_where_the_output_is_no_screen(place: Path) -> None:
    ended = run("lookup", "P-00000-00000", "in", "--key", "key", folder=place)
    assert (ended.code, ended.out) == (2, "")
    assert "on a screen only" in ended.err


@pytest.mark.skipif(sys.platform == "win32", reason="needs a pseudo terminal")
def test_lookup_turns_a_pseudonym_back_on_a_screen(place: Path) -> None:
    import pty

    from safecheck.dicom.pseudonyms import Pseudonyms, load_or_make_key

    truth = ct_body(place / "asked", seed=9, rows=64, columns=64, slices=1)
    name = Pseudonyms(load_or_make_key(place / "screen.key")).name("study", truth.study_uid)
    screen, terminal = pty.openpty()
    process = subprocess.Popen(
        command_line("lookup", name, "asked", "--key", "screen.key"), cwd=place, env=environment_of(), stdout=terminal
    )
    assert process.wait(60) == 0
    os.close(terminal)
    shown = os.read(screen, 65536).decode()
    os.close(screen)
    assert truth.study_uid in shown
    written = [path for path in place.rglob("*") if path.is_file() and path.parent.name != "asked"]
    assert [path for path in written if truth.study_uid.encode() in path.read_bytes()] == []


def test_quiet_says_nothing_while_it_works(place: Path, tmp_path: Path) -> None:
    quiet = run("census", place / "in", "--key", "key", "--quiet", folder=tmp_path)
    loud = run("census", place / "in", "--key", "key", folder=tmp_path)
    assert (quiet.code, quiet.err, quiet.out) == (0, "", loud.out)
    assert loud.err != ""


@pytest.mark.skipif(sys.platform == "win32", reason="pipes of POSIX")
@pytest.mark.parametrize("arguments", [["--help"], ["census", "in", "--key", "key", "-q"]], ids=["help", "census"])
def test_a_reader_that_goes_away_leaves_no_trace(place: Path, arguments: list[str]) -> None:
    reading, writing = os.pipe()
    os.close(reading)
    process = subprocess.Popen(
        command_line(*arguments), cwd=place, env=environment_of(), stdout=writing, stderr=subprocess.PIPE, text=True
    )
    os.close(writing)
    said = process.communicate(timeout=60)[1]
    assert "Traceback" not in said
    assert "Exception ignored" not in said
    assert process.returncode not in (1, 120)


def test_ctrl_c_in_any_command_ends_with_5(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], place: Path
) -> None:
    def be_stopped(*_: object, **__: object) -> object:
        raise KeyboardInterrupt

    monkeypatch.setattr("safecheck.jobs.census.take_census", be_stopped)
    assert call(monkeypatch, "census", str(place / "in"), "-q") == 5
    assert capsys.readouterr().err == "safecheck: stopped; the same command goes on\n"


STOPPED_WHILE_LOADING = """
import runpy, sys

class Stop:
    def find_spec(self, name, *_):
        if name == "safecheck.cli":
            raise KeyboardInterrupt

sys.meta_path.insert(0, Stop())
sys.argv = ["safecheck", "--help"]
runpy.run_module("safecheck", run_name="__main__")
"""


def test_ctrl_c_while_modules_load_ends_with_5_and_no_trace() -> None:
    ended = subprocess.run(
        [sys.executable, "-c", STOPPED_WHILE_LOADING], env=environment_of(), capture_output=True, check=False
    )
    assert (ended.returncode, ended.stdout, ended.stderr) == (5, b"", b"")
