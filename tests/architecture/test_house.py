"""The house: who may import whom, what stands where, how long things are, and what is written beside them."""

from __future__ import annotations

import ast
import importlib
import inspect
import json
import os
import pkgutil
import re
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

import stillfield
from stillfield.settings.load import load_run
from stillfield.settings.still_file import load_still_file
from stillfield.settings.trial_file import load_trial

ROOT = Path(__file__).parents[2]
PACKAGE = ROOT / "pipeline" / "stillfield"
PROJECT = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))

#: What may stand at the top of the repository. Names with a dot in front are checked for by name as well.
TOP = {
    "pyproject.toml", "README.md", "DEVELOPERS.md", "pipeline", "config", "tests", "outputs", "LICENSE",
    "requirements.lock", ".gitignore", ".ci",
}  # fmt: skip

MODULE_LINES = 450
FUNCTION_LINES = 60


def committed() -> list[Path]:
    """Files git knows in the last commit or the index, without those just deleted."""
    told = subprocess.run(["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, text=True, check=False)
    assert told.returncode == 0, f"the tests of the house need the repository: {told.stderr}"
    return [ROOT / name for name in told.stdout.split("\0") if name and (ROOT / name).exists()]


def modules() -> list[str]:
    """Every module of the package but the one that runs it."""
    found = pkgutil.walk_packages(stillfield.__path__, "stillfield.")
    return [module.name for module in found if not module.name.endswith("__main__")]


def sources() -> list[Path]:
    return sorted(PACKAGE.rglob("*.py"))


def shown(path: Path) -> str:
    return path.relative_to(ROOT).as_posix()


def test_import_contracts_hold():
    code = "import sys; from importlinter.cli import lint_imports; sys.exit(lint_imports(no_cache=True))"
    told = subprocess.run(
        [sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=False,
        env={**os.environ, "PYTHONPATH": str(ROOT / "pipeline")},
    )  # fmt: skip
    assert told.returncode == 0, told.stdout + told.stderr
    contracts = PROJECT["tool"]["importlinter"]["contracts"]
    assert f"Contracts: {len(contracts)} kept, 0 broken." in told.stdout


def test_every_stage_is_independent_of_every_other():
    """A stage that is not named in the contract would be free."""
    (contract,) = [c for c in PROJECT["tool"]["importlinter"]["contracts"] if c["type"] == "independence"]
    stages = {f"stillfield.stages.{path.stem}" for path in (PACKAGE / "stages").glob("*.py")} - {
        "stillfield.stages.__init__"
    }
    assert set(contract["modules"]) == stages


def test_the_top_of_the_repository_holds_only_what_belongs_there():
    assert {path.relative_to(ROOT).parts[0] for path in committed()} <= TOP
    assert not (ROOT / "pipeline" / "__init__.py").exists()
    config = {path.suffix for path in committed() if path.is_relative_to(ROOT / "config")}
    assert ".py" not in config
    outputs = [shown(path) for path in committed() if path.is_relative_to(ROOT / "outputs")]
    assert outputs == ["outputs/.gitkeep"]


def test_test_files_have_names_of_their_own():
    names = [path.name for path in (ROOT / "tests").rglob("test_*.py")]
    assert sorted(names) == sorted(set(names))


@pytest.mark.parametrize("path", sources(), ids=shown)
def test_modules_are_one_subject_long(path):
    lines = len(path.read_text(encoding="utf-8").splitlines())
    assert lines <= MODULE_LINES, f"{shown(path)} has {lines} lines"
    assert path.stem not in {"utils", "hel" + "pers", "common", "misc"}


def test_functions_are_short_enough_to_be_read():
    """The body is counted without its docstring."""
    too_long = []
    for path in sources():
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            if not isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
                continue
            body = node.body[1:] if ast.get_docstring(node) is not None else node.body
            length = (body[-1].end_lineno or 0) - body[0].lineno + 1 if body else 0
            positional = len(node.args.posonlyargs) + len(node.args.args)
            if length > FUNCTION_LINES:
                too_long.append(f"{shown(path)}:{node.lineno} {node.name} has {length} lines")
            if positional > 8:
                too_long.append(f"{shown(path)}:{node.lineno} {node.name} takes {positional} positional arguments")
    assert too_long == []


def forbidden() -> re.Pattern[str]:
    """What no committed file may say; put together from parts, so that this file does not say it either."""
    hosts = [name + r"\." + end for name, end in (
        ("py" + "pi", "org"), ("python" + "hosted", "org"), ("ana" + "conda", "org"), ("npm" + "js", "(org|com)"),
        ("crates", "io"), ("docker", "io"),
    )]  # fmt: skip
    machine = [rf"(?<![\w.~<>-])/{name}/" for name in ("wo" + "rk", "ro" + "ot", "ho" + "me", "Us" + "ers", "t" + "mp")]
    origin = [rf"\b{word}s?\b" for word in ("lec" + "ture", "tran" + "script", "webi" + "nar", "seed" + "[- ]talk")]
    making = [rf"\b{word}s?\b" for word in ("hel" + "per", "age" + "nt")]
    making += [rf"\b{word} #?\d+\b(?! [hs]\b)" for word in ("iss" + "ue", "st" + "ep", "ta" + "sk")]
    return re.compile("|".join([*hosts, *machine, *origin, *making]), re.IGNORECASE)


@pytest.mark.parametrize(
    "text", ["//py" + "pi.org/simple", "in /wo" + "rk/main", "a lec" + "ture", "/ho" + "me/a.nc", "see iss" + "ue 3"]
)
def test_the_forbidden_words_are_found(text):
    assert forbidden().search(text)


@pytest.mark.parametrize("text", ["share/workbench", "network/a", "a step 1 h long", "collected", "reagents"])
def test_innocent_words_are_not(text):
    assert not forbidden().search(text)


def test_no_committed_file_names_a_machine_a_registry_or_the_way_it_was_made():
    pattern = forbidden()
    found = []
    for path in committed():
        try:
            text = path.read_text(encoding="utf-8")
        except UnicodeDecodeError:
            continue  # a binary file says nothing to a reader
        for number, line in enumerate(text.splitlines(), start=1):
            hit = pattern.search(line)
            if hit:
                found.append(f"{shown(path)}:{number}: {hit[0]}")
    assert found == []


def test_committed_files_are_small():
    large = {shown(path): path.stat().st_size for path in committed() if path.stat().st_size > 1_500_000}
    assert large == {}


def test_importing_the_package_loads_no_data_library():
    libraries = {re.split(r"[\[><=~; ]", item, maxsplit=1)[0] for item in PROJECT["project"]["dependencies"]}
    assert {"numpy", "xarray", "pydantic"} <= libraries
    code = f"import sys, stillfield; print(sorted({{name.partition('.')[0] for name in sys.modules}} & {libraries}))"
    told = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=False,
        env={**os.environ, "PYTHONPATH": str(ROOT / "pipeline")},
    )  # fmt: skip
    assert (told.returncode, told.stdout.strip()) == (0, "[]"), told.stderr


def test_importing_every_module_defines_names_and_does_nothing_else(tmp_path):
    """No output, no file, no warning, whatever is imported."""
    code = f"import importlib\nfor name in {modules()!r}: importlib.import_module(name)"
    told = subprocess.run(
        [sys.executable, "-W", "error", "-W", "ignore:numpy.ndarray size changed:RuntimeWarning", "-c", code],
        cwd=tmp_path, capture_output=True, text=True, check=False,
        env={**os.environ, "PYTHONPATH": str(ROOT / "pipeline")},
    )  # fmt: skip
    assert (told.returncode, told.stdout, told.stderr) == (0, "", "")
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize("path", sorted((ROOT / "config").glob("*.yaml")), ids=lambda path: path.name)
def test_shipped_run_files_load(path):
    settings = load_trial(path)[0] if path.stem == "trial" else load_run(path)
    assert settings.name == path.stem


@pytest.mark.parametrize("path", sorted((ROOT / "config" / "stills").glob("*.yaml")), ids=lambda path: path.name)
def test_shipped_still_files_load(path):
    assert load_still_file(path).name == path.stem


def test_the_shipped_schemas_are_json():
    for path in (ROOT / "config").glob("*.json"):
        assert json.loads(path.read_text(encoding="utf-8"))["$schema"].startswith("https://json-schema.org/")


def locked() -> dict[str, str]:
    """Name to the text of its entry in the lock file."""
    text = (ROOT / "requirements.lock").read_text(encoding="utf-8")
    entries = re.split(r"\n(?=[A-Za-z0-9])", re.sub(r"^\s*#.*\n", "", text, flags=re.MULTILINE))
    return {plain(re.split(r"[=\[ ;]", entry, maxsplit=1)[0]): entry for entry in entries if entry.strip()}


def plain(name: str) -> str:
    """Normalise the name of a package as PEP 503 says."""
    return re.sub(r"[-_.]+", "-", name).lower()


def test_the_lock_file_pins_by_hash_and_names_no_address():
    text = (ROOT / "requirements.lock").read_text(encoding="utf-8")
    assert "://" not in text
    assert "--index-url" not in text
    assert "--find-links" not in text
    for name, entry in locked().items():
        assert re.match(r"[A-Za-z0-9._-]+==[^\s;]+", entry), name
        assert "--hash=sha256:" in entry, name


def test_the_lock_file_holds_everything_the_project_asks_for():
    asked = [
        *PROJECT["project"]["dependencies"], *PROJECT["project"]["optional-dependencies"]["speed"],
        *(item for group in ("build", "test", "dev") for item in PROJECT["dependency-groups"][group]),
    ]  # fmt: skip
    names = {plain(re.split(r"[\[><=~; ]", item, maxsplit=1)[0]) for item in asked}
    assert names - set(locked()) == set()


#: Arithmetic of one sub-step or of a row of cells; the heads of the modules tell their quantities.
KERNELS = tuple(
    f"stillfield.physics.{name}" for name in ("balance_kernel", "step_days_compiled", "step_optics_compiled")
)


def public_functions() -> list[tuple[str, object]]:
    """Public functions defined in physics and stages."""
    found = []
    for name in modules():
        if not name.startswith(("stillfield.physics.", "stillfield.stages.")) or name in KERNELS:
            continue
        module = importlib.import_module(name)
        for label, value in vars(module).items():
            function = inspect.unwrap(value) if callable(value) else value
            if not label.startswith("_") and inspect.isfunction(function) and function.__module__ == name:
                found.append((f"{name}.{label}", function))
    return found


def section(text: str, name: str) -> str:
    """Text of one numpydoc section, or nothing."""
    found = re.search(rf"^{name}\n-{{{len(name)}}}\n(.*?)(?=^\w[\w ]*\n-{{3,}}$|\Z)", text, re.MULTILINE | re.DOTALL)
    return found[1] if found else ""


@pytest.mark.parametrize(("name", "function"), public_functions(), ids=lambda value: getattr(value, "__name__", ""))
def test_public_functions_say_what_they_take_and_give(name, function):
    """numpydoc: every parameter by name under Parameters, Returns or Yields where something comes back."""
    text = inspect.getdoc(function) or ""
    assert text, f"{name} has no docstring"
    heads = [line for line in section(text, "Parameters").splitlines() if line and not line.startswith(" ")]
    told = {word for head in heads for word in re.findall(r"\w+", head.partition(" :")[0])}
    signature = inspect.signature(function)
    assert set(signature.parameters) - told == set(), f"{name} does not tell them under Parameters"
    gives = signature.return_annotation not in ("None", None, inspect.Signature.empty)
    assert not gives or section(text, "Returns") or section(text, "Yields"), f"{name} does not tell what it returns"


def test_there_are_public_functions_to_look_at():
    assert len(public_functions()) > 60
