"""Run files in and out: load and check one, write the resolved one, describe both kinds for editors."""

from __future__ import annotations

import io
import json
from pathlib import Path
from typing import Any, Literal

from pydantic import BaseModel
from ruamel.yaml import YAML

from stillfield.errors import RunFileError, StillfieldError
from stillfield.settings.faults import check, closest
from stillfield.settings.model import RunSettings
from stillfield.settings.still_file import StillKeys
from stillfield.settings.text import read_text
from stillfield.settings.trial_file import TrialSettings

Kind = Literal["run", "still", "trial"]

_MODELS: dict[str, type[BaseModel]] = {"run": RunSettings, "still": StillKeys, "trial": TrialSettings}

_RESOLVED_HEADER = """\
# The settings of this run, defaults filled in. Paths count from the folder of the run file it was made
# from; of absolute paths only the end is kept.
"""


def load_run(path: str | Path) -> RunSettings:
    """Read and check a run file and the still files it names.

    Parameters
    ----------
    path : path
        The run file.

    Returns
    -------
    RunSettings

    Raises
    ------
    StillfieldError
        When there is no such file or it cannot be read.
    RunFileError
        With every fault of the run file and of its still files at once.
    """
    run_file = Path(path)
    if not run_file.is_file():
        raise _no_such_run_file(run_file, str(path))
    document = read_text(run_file, str(path))
    settings, faults = check(RunSettings, document, {"folder": run_file.parent})
    if settings is None:
        raise RunFileError(str(path), faults)
    return settings


def _no_such_run_file(path: Path, given: str) -> StillfieldError:
    if path.is_dir():
        return StillfieldError("is a folder, not a run file", where=given)
    try:
        names = [entry.name for entry in path.parent.iterdir() if entry.suffix in (".yaml", ".yml")]
    except OSError:
        names = []
    close = closest(path.name, names)
    cure = f"Did you mean '{path.with_name(close)}'?" if close else None
    return StillfieldError("no such run file", where=given, cure=cure)


def resolved_yaml(settings: RunSettings) -> str:
    """Write `settings` as a run file with every default filled in.

    The text depends on the settings only: no machine path, no time.

    Parameters
    ----------
    settings : RunSettings
        A checked run.

    Returns
    -------
    str
        YAML 1.2 that `load_run` reads again beside the original run file.
    """
    yaml = YAML(typ="safe", pure=True)
    yaml.default_flow_style = False
    yaml.sort_base_mapping_type_on_output = False  # type: ignore[assignment]
    yaml.width = 100
    stream = io.StringIO()
    yaml.dump(settings.model_dump(mode="json", by_alias=True, exclude_none=True), stream)
    return _RESOLVED_HEADER + stream.getvalue()


def schema_text(kind: Kind = "run") -> str:
    """Text of the schema file that ships in config/."""
    return json.dumps(json_schema(kind), indent=2, ensure_ascii=False) + "\n"


def json_schema(kind: Kind = "run") -> dict[str, Any]:
    """JSON Schema of run, still or trial files, from the models that check them.

    Parameters
    ----------
    kind : {'run', 'still', 'trial'}
        Which kind of file.

    Returns
    -------
    dict
        JSON Schema, draft 2020-12, for editors that complete and check.
    """
    body = _MODELS[kind].model_json_schema(by_alias=True)
    body["title"] = f"stillfield {kind} file"
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **body}
