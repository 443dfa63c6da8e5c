"""The command line: exit codes, one message for bad input, and a start that loads nothing heavy.

Exit codes are seen from outside, through a process of its own; how a run ends is acted by a stand-in for
`stillfield.run`, because here only the command line is under test.
"""

from __future__ import annotations

import json
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

import stillfield
from stillfield import errors
from stillfield.cli import build_parser, main

ROOT = Path(__file__).parents[2]
CONFIG = ROOT / "config"
PACKAGE = Path(stillfield.__file__).parents[1]
#: How long a machine under load may take to start or to end a process. [s]
PATIENCE_S = 300

#: Acts `stillfield.run.run` and then hands the arguments to the command line.
ACTOR = """
import errno, logging, sys, types, warnings
from stillfield.errors import OutputError, WeatherError

def run(settings, *, run_file):
    log = logging.getLogger("stillfield.run")
    log.debug("a detail")
    log.info("reading %s", settings.name)
    log.warning("2 days were left out")
    warnings.warn("a library says so", RuntimeWarning)
    {act}
    return f"done: {{settings.folder.as_posix()}}"

stand_in = types.ModuleType("stillfield.run")
stand_in.run = run
sys.modules["stillfield.run"] = stand_in
from stillfield.cli import main
sys.exit(main(sys.argv[1:]))
"""


def command(*arguments, act=None, cwd=ROOT, **options):
    start = ["-m", "stillfield"] if act is None else ["-c", ACTOR.format(act=act)]
    environment = {**os.environ, "PYTHONPATH": str(PACKAGE)}
    return subprocess.run(
        [sys.executable, *start, *map(str, arguments)],
        capture_output=True, text=True, cwd=cwd, env=environment, check=False, timeout=PATIENCE_S, **options,
    )  # fmt: skip


def test_help_tells_every_exit_code():
    told = command("--help")
    assert told.returncode == 0
    assert told.stderr == ""
    first_words = [line.split()[0] for line in told.stdout.splitlines() if line.startswith("  ")]
    codes = {word for word in first_words if word.isdigit()}
    constants = {str(value) for name, value in vars(errors).items() if name.startswith("EXIT_")}
    assert codes == constants == {"0", "1", "2", "3", "130"}


@pytest.mark.parametrize("arguments", [["--help"], ["--version"], ["run", "--help"]])
def test_help_loads_nothing_heavy(arguments):
    code = (
        "import sys; from stillfield.cli import main; code = main(sys.argv[1:]); "
        "print([name for name in sys.modules if name.partition('.')[0] in "
        "('numpy', 'xarray', 'pandas', 'pydantic', 'ruamel', 'pvlib', 'matplotlib', 'dask', 'scipy')], "
        "file=sys.stderr); sys.exit(code)"
    )
    told = subprocess.run(
        [sys.executable, "-c", code, *arguments], capture_output=True, text=True, check=False,
        env={**os.environ, "PYTHONPATH": str(PACKAGE)},
    )  # fmt: skip
    assert (told.returncode, told.stderr.strip()) == (0, "[]")


def test_version():
    assert command("--version").stdout == f"stillfield {stillfield.__version__}\n"


@pytest.mark.parametrize(
    "arguments",
    [[], ["rum", "a.yaml"], ["run"], ["run", "a.yaml", "--quite"], ["run", "a.yaml", "-qv"], ["schema", "weather"]],
)
def test_wrong_usage_is_2_with_words_on_stderr(arguments):
    told = command(*arguments)
    assert told.returncode == 2
    assert told.stdout == ""
    assert told.stderr.splitlines()[-1].startswith("stillfield")
    assert "Traceback" not in told.stderr


def test_bad_input_is_one_message_without_traceback(tmp_path):
    lines = ["name: x", "weather: {kind: netcdf, files: gone.nc}", "still: gone.yaml", "metod: rule"]
    (tmp_path / "run.yaml").write_text("\n".join(lines))
    told = command("run", "run.yaml", cwd=tmp_path)
    assert told.returncode == 2
    assert told.stdout == ""
    assert told.stderr.splitlines() == [
        "stillfield: run.yaml has 3 faults:",
        "  line 2, weather.files: no such file 'gone.nc'",
        "  line 3, still: no such file 'gone.yaml'",
        "  line 4, metod: unknown key (did you mean 'method'?)",
    ]
    assert list(tmp_path.iterdir()) == [tmp_path / "run.yaml"]


def test_a_missing_run_file_is_told_with_its_neighbour():
    told = command("run", "config/dmo.yaml")
    assert (told.returncode, told.stdout) == (2, "")
    assert told.stderr == "stillfield: config/dmo.yaml: no such run file. Did you mean 'config/demo.yaml'?\n"


@pytest.mark.parametrize("content", [b"\x89HDF\r\n\x1a\n\xff\xfe", b"", b"\x00" * 100, b"a: [", b"- 1", b"%PDF-1.7"])
def test_a_file_that_is_no_run_file_never_gives_a_traceback(tmp_path, content):
    (tmp_path / "run.yaml").write_bytes(content)
    told = command("run", "run.yaml", cwd=tmp_path)
    assert (told.returncode, told.stdout) == (2, "")
    assert told.stderr.startswith("stillfield: run.yaml has 1 fault:\n")
    assert "Traceback" not in told.stderr


@pytest.mark.parametrize(
    ("act", "code", "words"),
    [
        ("pass", 0, None),
        ("raise WeatherError('is empty', where='a.nc')", 2, "stillfield: a.nc: is empty"),
        ("raise OutputError('cannot be written', where='out')", 3, "stillfield: out: cannot be written"),
        ("raise OSError(errno.ENOSPC, 'No space left on device')", 3,
         "stillfield: an output could not be written: No space left on device"),
        ("raise KeyboardInterrupt", 130, "stillfield: interrupted; outputs that were finished are whole"),
    ],
)  # fmt: skip
def test_how_a_run_ends_decides_the_code(act, code, words):
    told = command("run", CONFIG / "demo.yaml", "--quiet", act=act)
    assert told.returncode == code
    assert told.stderr.splitlines() == ([words] if words else [])
    assert told.stdout == ""


def test_a_defect_is_1_with_a_traceback():
    told = command("run", CONFIG / "demo.yaml", "-q", act="{}['gone']")
    assert told.returncode == 1
    first, second, *_, last = told.stderr.splitlines()
    assert first.startswith("stillfield: this is a defect in stillfield")
    assert (second, last) == ("Traceback (most recent call last):", "KeyError: 'gone'")


def test_plain_lines_say_progress_and_the_summary_goes_to_stdout():
    told = command("run", CONFIG / "demo.yaml", act="pass")
    assert told.stdout == "done: outputs/demo\n"
    assert told.stderr.splitlines() == ["reading demo", "warning: 2 days were left out"]


def test_quiet_says_nothing_when_all_is_well():
    told = command("run", CONFIG / "demo.yaml", "-q", act="pass")
    assert (told.returncode, told.stdout, told.stderr) == (0, "", "")


def test_verbose_says_details_and_the_warnings_of_libraries():
    told = command("run", CONFIG / "demo.yaml", "--verbose", act="pass")
    assert told.stdout == "done: outputs/demo\n"
    for words in ("DEBUG stillfield.run: a detail", "INFO stillfield.run: reading demo", "a library says so"):
        assert words in told.stderr


def test_output_overrules_the_run_file(tmp_path):
    told = command("run", CONFIG / "demo.yaml", "--output", "there/too", act="pass", cwd=tmp_path)
    assert told.stdout == "done: there/too/demo\n"
    (tmp_path / "taken").touch()
    refused = command("run", CONFIG / "demo.yaml", "--output", "taken", act="pass", cwd=tmp_path)
    assert refused.returncode == 2
    assert refused.stderr == "stillfield: the output folder 'taken' is a file, not a folder\n"


def test_a_real_interrupt_is_130(tmp_path):
    ready = tmp_path / "ready"
    # A process that a shell has put into the background has its interrupts ignored, and so have those that it starts:
    # tests that run there must ask for the handler that a process in the foreground begins with.
    act = (
        "import pathlib, signal, time; signal.signal(signal.SIGINT, signal.default_int_handler); "
        f"pathlib.Path({str(ready)!r}).touch(); time.sleep({PATIENCE_S}); raise SystemExit('was not interrupted')"
    )
    with subprocess.Popen(
        [sys.executable, "-c", ACTOR.format(act=act), "run", str(CONFIG / "demo.yaml"), "-q"],
        stderr=subprocess.PIPE, text=True, env={**os.environ, "PYTHONPATH": str(PACKAGE)},
    ) as process:  # fmt: skip
        try:
            late = time.monotonic() + PATIENCE_S
            while not ready.exists():
                assert process.poll() is None, process.stderr.read()
                assert time.monotonic() < late, "the run never began"
                time.sleep(0.01)
            process.send_signal(signal.SIGINT)
            _, words = process.communicate(timeout=PATIENCE_S)
        finally:
            process.kill()
    assert process.returncode == 130
    assert words == "stillfield: interrupted; outputs that were finished are whole\n"


@pytest.mark.parametrize("kind", ["run", "still", "trial"])
def test_schema_prints_what_config_ships(kind):
    told = command("schema", kind)
    assert told.returncode == 0
    assert told.stdout == (CONFIG / f"{kind}-file.schema.json").read_text(encoding="utf-8")
    assert json.loads(told.stdout)["title"] == f"stillfield {kind} file"


def test_a_reader_who_leaves_early_is_no_fault():
    reader, writer = os.pipe()
    os.close(reader)
    told = subprocess.run(
        [sys.executable, "-m", "stillfield", "schema"], stdout=writer, stderr=subprocess.PIPE, text=True,
        check=False, env={**os.environ, "PYTHONPATH": str(PACKAGE)},
    )  # fmt: skip
    os.close(writer)
    assert (told.returncode, told.stderr) == (0, "")


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="needs the device that is always full")
def test_a_full_disk_behind_stdout_is_3():
    with open("/dev/full", "w") as full:  # noqa: PTH123 (a device, not a file)
        told = subprocess.run(
            [sys.executable, "-m", "stillfield", "schema"], stdout=full, stderr=subprocess.PIPE, text=True,
            check=False, env={**os.environ, "PYTHONPATH": str(PACKAGE)},
        )  # fmt: skip
    assert told.returncode == 3
    assert told.stderr == "stillfield: standard output: cannot be written (got No space left on device)\n"


def test_main_returns_the_code_and_never_leaves_the_process(capsys):
    assert main(["--version"]) == 0
    assert main(["run", "gone.yaml"]) == 2
    assert capsys.readouterr().err == "stillfield: gone.yaml: no such run file\n"


def test_options_are_not_guessed_from_their_beginning():
    with pytest.raises(SystemExit):
        build_parser().parse_args(["run", "a.yaml", "--out", "x"])
