"""Wrong use and bad luck: one line that says what is wrong, the right exit code, never a traceback."""

from __future__ import annotations

import contextlib
import json
import os
import re
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from opacity.cli import commands
from opacity.cli.main import run as entry_point
from opacity.provenance import VERSION
from opacity.tables.shard import read_shard

ROOT = Path(__file__).parents[2]
INTERRUPTED = "interrupted: nothing half-written was left behind; the same command starts again\n"


def run(*arguments: object, **options):
    """A real process of the program, with the output as bytes."""
    environment = {**os.environ, "PYTHONPATH": str(ROOT), **options.pop("environment", {})}
    command = [sys.executable, "-m", "opacity", *arguments]
    options = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE, **options}
    return subprocess.run(command, env=environment, check=False, timeout=60, **options)


@pytest.mark.parametrize(
    "arguments, message",
    [
        ([], "opacity: the following arguments are required: COMMAND; `opacity --help` tells more"),
        (["frobnicate"], "opacity: argument COMMAND: invalid choice: 'frobnicate'"),
        (["build"], "opacity build: the following arguments are required: RECIPE; `opacity build --help` tells more"),
        (["build", "co.toml", "--frob"], "opacity: unrecognized arguments: --frob"),
        (["build", "co.toml", "--workers", "0"], "argument --workers: expected a whole number, 1 to 1024, found '0'"),
        (["build", "co.toml", "--workers", "x"], "argument --workers: expected a whole number, 1 to 1024, found 'x'"),
        (["build", "co.toml", "--workers", "1e9"], "expected a whole number, 1 to 1024, found '1e9'"),
        (["build", "co.toml", "--workers", "9" * 5000], "expected a whole number, 1 to 1024, found '99"),
        (["build", "co.toml", "--workers", "²"], "expected a whole number, 1 to 1024, found '²'"),
        (["check", "co.toml", "--seed", "-1"], "argument --seed: expected a whole number, 0 or more, found '-1'"),
        (["check", "co.toml", "--seed", "1.5"], "argument --seed: expected a whole number, 0 or more, found '1.5'"),
        (["check", "co.toml", "--seed", "9" * 5000], "argument --seed: expected a whole number, 0 or more, found '99"),
        (
            ["show", "x.h5", "--zoom", "a,b"],
            "argument --zoom: expected FROM,TO in cm-1, such as 2100,2110, found 'a,b'",
        ),
        (["show", "x.h5", "--zoom", "2"], "argument --zoom: expected FROM,TO in cm-1"),
        (["show", "x.h5", "--zoom", "1,2,3"], "argument --zoom: expected FROM,TO in cm-1"),
        (["show", "x.h5", "--zoom", "2300,2000"], "argument --zoom: expected FROM,TO in cm-1"),
        (["show", "x.h5", "--zoom", "nan,nan"], "argument --zoom: expected FROM,TO in cm-1"),
        (["show", "x.h5", "--zoom", "2,inf"], "argument --zoom: expected FROM,TO in cm-1"),
        (["show", "x.h5", "--zoom", "2,3"], "--zoom: enlarges a part of a picture; give --plot FILE.png too"),
        (["check", "co.toml", "--recipe", "co.toml"], "--recipe: co.toml is a recipe itself; give the table, or no"),
    ],
)
def test_wrong_use_is_two_and_one_line(opacity, project, arguments, message):
    code, out, err = opacity(*arguments)
    assert (code, out) == (2, "")
    assert message in err
    assert err.count("\n") == 1


@pytest.mark.parametrize("command", ["plan", "build", "check"])
def test_all_faults_of_a_recipe_are_told(opacity, project, command):
    recipe = project / "co.toml"
    text = recipe.read_text()
    recipe.write_text(text.replace("cutoff = 25.0", "cutof = 25.0").replace("step = 0.004", "step = -1"))
    code, out, err = opacity(command, "co.toml")
    assert (code, out) == (2, "")
    lines = err.splitlines()
    assert len(lines) == 2
    assert all(line.startswith("co.toml:") for line in lines)
    assert any("did you mean cutoff?" in line for line in lines)


def test_a_given_recipe_with_faults_is_two(opacity, table):
    (table.parent / "bad.toml").write_text("[molecule]\n")
    code, out, err = opacity("check", table, "--recipe", table.parent / "bad.toml")
    assert (code, out) == (2, "")
    assert len(err.splitlines()) > 3
    code, out, err = opacity("check", table, "--recipe", "none.toml")
    assert (code, out) == (2, "")
    assert err.startswith("none.toml: no such file")


@pytest.mark.parametrize("command", ["plan", "build"])
def test_bad_data_is_one(opacity, write_recipe, tmp_path, samples, command):
    lines = tmp_path / "lines.par"
    lines.write_bytes((samples / "carbon-monoxide.par").read_bytes()[:-40])
    path = write_recipe("co", (f"{samples}/carbon-monoxide.par", "lines.par"))
    code, out, err = opacity(command, path)
    assert (code, out) == (1, "")
    assert err.startswith(f"{tmp_path}/lines.par:202: record of the wrong length")
    assert err.count("\n") == 1


@pytest.mark.parametrize("command", ["new", "plan", "build", "check", "show"])
@pytest.mark.parametrize(
    "error, code, message",
    [
        (
            KeyboardInterrupt(),
            130,
            INTERRUPTED,
        ),
        (MemoryError(), 1, "not enough memory: use fewer nodes, fewer points or a shorter line list\n"),
        (OSError(5, "Input/output error", "/a/file"), 1, "/a/file: Input/output error\n"),
        (OSError("odd"), 1, "output: odd\n"),
    ],
    ids=["interrupt", "memory", "disk", "odd"],
)
def test_bad_luck_has_its_code_and_one_line(opacity, monkeypatch, command, error, code, message):
    def unlucky(arguments):
        raise error

    monkeypatch.setattr(commands, command, unlucky)
    assert opacity(command, "CO") == (code, "", message)


@pytest.mark.parametrize("becomes", [ImportError("initialization failed"), KeyboardInterrupt()], ids=repr)
def test_an_interrupt_while_modules_load_is_an_interrupt(monkeypatch, capsys, becomes):
    def loading(arguments):
        with contextlib.suppress(KeyboardInterrupt):
            os.kill(os.getpid(), signal.SIGINT)
            time.sleep(5.0)
        raise becomes

    monkeypatch.setattr(commands, "plan", loading)
    monkeypatch.setattr(sys, "argv", ["opacity", "plan", "co.toml"])
    before = {number: signal.getsignal(number) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        with pytest.raises(SystemExit) as stop:
            entry_point()
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
    assert stop.value.code == 130
    assert capsys.readouterr() == (
        "",
        INTERRUPTED,
    )


@pytest.mark.parametrize("words", [["plan", "RECIPE", "--json"], ["build", "RECIPE", "--js"]], ids=str)
def test_with_json_an_error_is_json_too(opacity, write_recipe, words):
    path = write_recipe("co", ("{ air = 1.0 }", "{ H2 = 0.8, He = 0.2 }"))
    code, out, err = opacity(*(path if word == "RECIPE" else word for word in words))
    assert code == 2
    assert len(err.splitlines()) == 2
    assert json.loads(out) == {"error": err.splitlines()}


@pytest.mark.parametrize(
    "words, code",
    [
        (["show", "none.h5", "--json"], 1),
        (["check", "none.h5", "--json"], 1),
        (["plan", "none.toml", "--json"], 2),
        (["build", "--json"], 2),
        (["build", "co.toml", "--json", "--workers", "x"], 2),
    ],
    ids=str,
)
def test_every_command_with_json_tells_its_error_so(opacity, project, words, code):
    found, out, err = opacity(*words)
    assert found == code
    assert json.loads(out) == {"error": [err.rstrip("\n")]}
    # Without it stdout stays empty.
    words.remove("--json")
    assert opacity(*words)[1] == ""


def test_an_error_without_an_interrupt_is_not_hidden(monkeypatch):
    def broken(arguments):
        raise ZeroDivisionError("a fault of the program")

    monkeypatch.setattr(commands, "plan", broken)
    monkeypatch.setattr(sys, "argv", ["opacity", "plan", "co.toml"])
    before = {number: signal.getsignal(number) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        with pytest.raises(ZeroDivisionError):
            entry_point()
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def test_sigterm_ends_a_build_cleanly(write_recipe, tmp_path):
    # Every line at every one of three million points: work for seconds, of which a moment passes.
    wavenumber = "{ start = 2000.0, stop = 2300.0, step = 0.0001 }"
    recipe = write_recipe(wavenumber=wavenumber, cutoff="500.0", tolerance="1e-6")
    out = tmp_path / "out"
    command = [sys.executable, "-m", "opacity", "build", str(recipe), "-o", str(out), "--workers", "2", "--json"]
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    pipes = {"stdout": subprocess.PIPE, "stderr": subprocess.PIPE}
    with subprocess.Popen(command, env=environment, **pipes) as process:
        deadline = time.monotonic() + 60.0
        while not out.exists() and process.poll() is None and time.monotonic() < deadline:
            time.sleep(0.01)
        process.terminate()
        stdout, stderr = process.communicate(timeout=60.0)
    assert process.returncode == 75
    message = stderr.decode().splitlines()[-1]
    told = re.fullmatch(
        r"terminated: nothing half-written was left behind; "
        r"(the same command starts again|(\d+) of \d+ units are done and kept; the same command goes on)",
        message,
    )
    assert told, message
    assert json.loads(stdout) == {"error": [message]}
    kept = [path for path in out.rglob("*") if path.is_file()]
    assert len(kept) == int(told[2] or 0)
    assert all(read_shard(path) for path in kept)


def test_a_termination_while_modules_load_is_one_too(monkeypatch, capsys):
    def loading(arguments):
        with contextlib.suppress(KeyboardInterrupt):
            os.kill(os.getpid(), signal.SIGTERM)
            time.sleep(5.0)
        raise ImportError("initialization failed")

    monkeypatch.setattr(commands, "plan", loading)
    monkeypatch.setattr(sys, "argv", ["opacity", "plan", "co.toml"])
    before = {number: signal.getsignal(number) for number in (signal.SIGINT, signal.SIGTERM)}
    try:
        with pytest.raises(SystemExit) as stop:
            entry_point()
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)
    assert stop.value.code == 75
    assert capsys.readouterr().err.startswith("terminated: nothing half-written")


MISSING = "cannot be opened (No such file or directory)"


@pytest.mark.parametrize(
    "arguments, code, message",
    [
        (["show", "none.h5"], 1, f"none.h5: {MISSING}"),
        (["check", "none.h5"], 1, f"none.h5: {MISSING}"),
        (["check", ""], 1, ".: not a file; expected a table"),
        (["check", "none.toml"], 2, "none.toml: no such file; expected a recipe; `opacity new FORMULA` writes"),
        (["build", "none.toml"], 2, "none.toml: no such file; expected a recipe; `opacity new FORMULA` writes"),
        (["plan", ""], 2, ".: not a file; expected a recipe, found a folder"),
        (["build", "tables"], 2, "tables: not a file; expected a recipe, found a folder"),
        (["show", "tables"], 1, "tables: not a file; expected a table"),
        (["check", "tables"], 1, "tables: not a file; expected a table (.h5), a recipe (.toml), or a line list: .par"),
        (["check", "a/CO__H2.broad"], 1, "a/CO__H2.broad: not checked by itself; expected a table (.h5), a recipe ("),
        (["check", "CO.pf.bz2"], 1, "plain or compressed; with its data set it is looked at too: give the .states or"),
        (["build", "/dev/null"], 2, "/dev/null: not a file; expected a recipe"),
        (["show", "/dev/zero"], 1, "/dev/zero: not a file; expected a table"),
        (["show", "co.toml"], 1, "co.toml: not a table: not a readable HDF5 file"),
        (["build", "tables/co.cross-section.h5"], 2, "tables/co.cross-section.h5:1: not UTF-8 text"),
        (["plan", "tables/co.log.json"], 2, "tables/co.log.json:1: not valid TOML"),
        (["check", "tables/co.log.json"], 1, "tables/co.log.json: not a table: not a readable HDF5 file"),
        (["check", "tables/co.cross-section.h5", "--recipe", "tables/co.cross-section.h5"], 2, "not UTF-8 text"),
        (["build", "co.toml", "-o", "co.toml"], 1, "co.toml: the folder for the tables cannot be made (File exists)"),
        (["build", "co.toml", "-o", "l" * 300], 1, "cannot be made (File name too long)"),
        (["new", "CO", "-o", "l" * 300], 1, "File name too long"),
        (["show", "l" * 300], 1, "cannot be opened (File name too long)"),
        (["check", "l" * 300], 1, "cannot be opened (File name too long)"),
        (["build", "l" * 300], 2, "cannot be read (File name too long)"),
        (["new", "CO", "-o", "nowhere/co.toml"], 1, "nowhere/co.toml: cannot be written (No such file or directory);"),
        (["new", "CO", "-o", "tables"], 2, "tables: is there already"),
        (["show", "tables/co.cross-section.h5", "--plot", "x.jpg"], 2, "x.jpg: a figure is written as PNG"),
        (["show", "tables/co.cross-section.h5", "--plot", "no/x.png"], 1, "no/x.png: cannot be written"),
        (["show", "a\0b"], 1, "cannot be opened (embedded null byte)"),
        (["check", "a\0b.h5"], 1, "cannot be opened (embedded null byte)"),
        (["build", "co.toml", "-o", "a\0b"], 1, "null byte"),
        (["new", "CO", "-o", "a\0b"], 2, "path: not the name of a file"),
    ],
)
def test_weird_paths_are_one_line(opacity, project, arguments, code, message):
    found, _, err = opacity(*arguments)
    assert message in err
    assert err.count("\n") == 1
    assert found == code


def test_a_pipe_is_not_waited_for(opacity, project):
    os.mkfifo("fifo")
    assert opacity("show", "fifo")[0] == 1
    assert opacity("build", "fifo")[0] == 2


def test_names_that_are_no_text(project):
    odd = os.fsencode(str(project)) + b"/odd\xff.toml"
    os.rename(project / "co.toml", odd)
    for encoding, arguments in (
        ("utf-8:strict", ["build", odd, "-o", b"t\xfe"]),
        ("ascii:strict", ["plan", odd]),
        ("latin-1", ["check", b"t\xfe/odd\xff.cross-section.h5"]),
    ):
        done = run(*arguments, cwd=project, environment={"PYTHONIOENCODING": encoding})
        assert done.stderr == b""
        assert done.returncode == 0
        assert b"odd" in done.stdout
    assert run("show", b"none\xff.h5", cwd=project).stderr.startswith(b"none\\udcff.h5: cannot be opened")


def test_the_module_is_the_command(project):
    done = run("--version")
    assert (done.returncode, done.stdout, done.stderr) == (0, f"opacity {VERSION}\n".encode(), b"")
    done = run("frobnicate")
    assert done.returncode == 2
    assert done.stdout == b""
    assert done.stderr.count(b"\n") == 1


@pytest.mark.parametrize("words", ["show T --json", "show T", "check T --json", "plan co.toml", "--help"])
def test_a_reader_that_leaves_early_sees_no_traceback(table, project, words):
    command = [sys.executable, "-m", "opacity", *words.replace("T", str(table)).split()]
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    reading, writing = os.pipe()
    os.close(reading)  # nobody reads: the first byte breaks the pipe
    with os.fdopen(writing, "wb") as pipe:
        done = subprocess.run(
            command, cwd=project, env=environment, stdout=pipe, stderr=subprocess.PIPE, timeout=60, check=False
        )
    assert done.returncode in (0, 1)
    assert b"Traceback" not in done.stderr
    assert b"Exception ignored" not in done.stderr


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="no /dev/full here")
def test_a_full_disk_for_the_output_is_one_line(table, project):
    with open("/dev/full", "wb") as full:
        done = run("show", table, cwd=project, stdout=full)
    assert done.returncode == 1
    assert done.stderr == b"output: No space left on device\n"


def test_a_closed_output_is_no_accident(table, project):
    shell = f'exec "{sys.executable}" -m opacity show "{table}" >&-'
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    done = subprocess.run(
        ["sh", "-c", shell], cwd=project, env=environment, stderr=subprocess.PIPE, timeout=60, check=False
    )
    assert (done.returncode, done.stderr) == (0, b"")
