"""Results of an earlier run, read back."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from leachkin.errors import InputProblems
from leachkin.files import check_path_text, file_bytes
from leachkin.problems import Problem

#: Version of results.json that this program writes and reads.
SCHEMA = 1
_STAGES = (
    "run",
    "balance",
    "kinetics",
    "tank",
    "heap",
    "cementation",
    "budget",
    "cautions",
    "assumed",
    "notes",
)


def read_results(path: str | Path) -> dict[str, Any]:
    """Return the results that ``leachkin run`` wrote.

    Parameters
    ----------
    path : str or Path
        ``results.json``, or the folder that holds it.

    Returns
    -------
    dict
        The stages by name; a stage that did not run is None.

    Raises
    ------
    InputProblems
        If the file is not there, is not JSON, is not from this program, or has another schema.
    """
    place = Path(check_path_text(str(path)))
    if place.is_dir():
        place = place / "results.json"
    data = _decoded(place)
    if not isinstance(data, dict) or "schema" not in data:
        raise _refused(place, "this JSON holds no key 'schema'", "a results.json of leachkin run")
    if data["schema"] != SCHEMA:
        raise _refused(
            place,
            f"schema {data['schema']!r}",
            f"schema {SCHEMA}",
            "run the campaign again with this version, or use the version named in the file",
        )
    missing = [stage for stage in _STAGES if stage not in data]
    if missing:
        raise _refused(
            place, f"no key {', '.join(missing)}", "every stage, null where it did not run"
        )
    return data


def _decoded(place: Path) -> Any:
    content = file_bytes(place, place.name)
    try:
        return json.loads(content.decode("utf-8"))
    except UnicodeDecodeError:
        raise _refused(place, "this is not UTF-8 text", "a results.json of leachkin run") from None
    except json.JSONDecodeError as error:
        raise _refused(
            place, f"this is not JSON ({error.msg}, line {error.lineno})", "a results.json"
        ) from None


def _refused(place: Path, found: str, allowed: str, try_this: str = "") -> InputProblems:
    hint = try_this or "name the results.json in a folder that leachkin run wrote"
    return InputProblems([Problem(place.name, None, "", "stop", found, allowed, hint)])
