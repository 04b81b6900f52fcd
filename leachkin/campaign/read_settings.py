"""Walks a campaign file against the schema: every key known, every value read, defaults put in."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

from leachkin.campaign.schema import FORMAT, Key, TableSchema
from leachkin.campaign.schema_tables import SCHEMA
from leachkin.campaign.settings import Assumption, Group, Setting, Settings
from leachkin.campaign.values import Value, ValueProblem, read_value
from leachkin.problems import Problem, unknown_name

LineOf = Callable[[str], int | None]

#: Tables that speak of a metal: a budget or a cementation alone names its own.
_OF_A_METAL = ("tables", "rate_law", "heap", "tank")
#: Where a what-if comes from, in place of a file name.
FROM_COMMAND_LINE = "--set"


@dataclass
class _Walk:
    """What has been read so far; one for each reading, thrown away after it."""

    file: str
    line_of: LineOf
    loose: frozenset[str]
    problems: list[Problem] = field(default_factory=list)
    values: dict[str, Setting] = field(default_factory=dict)
    repeated: dict[str, tuple[Group, ...]] = field(default_factory=dict)
    named: dict[str, dict[str, Group]] = field(default_factory=dict)
    free: dict[str, Group] = field(default_factory=dict)
    tables: set[str] = field(default_factory=set)

    def is_override(self, dotted: str) -> bool:
        """Whether a key, or one end of its range, comes from the command line."""
        if dotted in self.loose:
            return True
        return SCHEMA.table(dotted) is None and any(
            one.startswith(f"{dotted}.") for one in self.loose
        )

    def place(self, dotted: str) -> tuple[str, int | None]:
        if self.is_override(dotted):
            return FROM_COMMAND_LINE, None
        return self.file, self.line_of(dotted.replace(chr(34), ""))

    def add(self, problem: Problem, dotted: str) -> None:
        file, line = self.place(dotted)
        self.problems.append(replace(problem, file=file, row=line, column=problem.column or dotted))


def read_settings(
    data: Mapping[str, Any],
    file: str,
    line_of: LineOf,
    overrides: Mapping[str, str] | None = None,
) -> tuple[Settings, tuple[Problem, ...]]:
    """Return the settings of a campaign file, and everything that is wrong with it.

    Parameters
    ----------
    data : mapping
        The file as the TOML reader gives it.
    file : str
        File name for messages.
    line_of : callable
        Dotted key to line number, or None.
    overrides : mapping of dotted key to text
        What-ifs; they win over the file and are checked the same way.

    Returns
    -------
    settings : Settings
    problems : tuple of Problem
    """
    merged = _merged(data, overrides or {})
    walk = _Walk(file, line_of, frozenset(map(_as_written, overrides or {})))
    _check_top(walk, merged)
    for name, content in merged.items():
        if name in SCHEMA.children("") and isinstance(content, Mapping):
            _read_table(walk, name, content)
        elif name in SCHEMA.children("") and isinstance(content, list):
            _read_repeated(walk, name, content)
    _check_metals(walk, merged)
    _put_in_defaults(walk)
    settings = Settings(walk.values, walk.repeated, walk.named, walk.free, frozenset(walk.tables))
    return settings, tuple(walk.problems)


def split_dotted(dotted: str) -> list[str]:
    """Return the parts of a dotted key; a part in quotes may hold dots and spaces.

    Examples
    --------
    >>> split_dotted('budget.prices."scrap iron".price')
    ['budget', 'prices', 'scrap iron', 'price']
    """
    parts, part, quoted = [], "", False
    for character in dotted:
        if character == '"':
            quoted = not quoted
        elif character == "." and not quoted:
            parts.append(part)
            part = ""
        else:
            part += character
    return [*parts, part]


def _merged(data: Mapping[str, Any], overrides: Mapping[str, str]) -> dict[str, Any]:
    merged = {key: _copied(value) for key, value in data.items()}
    for dotted, text in overrides.items():
        *parents, last = split_dotted(dotted)
        table = merged
        for parent in parents:
            below = table.get(parent)
            table[parent] = below if isinstance(below, dict) else {}
            table = table[parent]
        table[last] = text
    return merged


def _copied(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {key: _copied(item) for key, item in value.items()}
    return [_copied(item) for item in value] if isinstance(value, list) else value


def _check_top(walk: _Walk, data: Mapping[str, Any]) -> None:
    if not data:
        walk.problems.append(
            Problem(
                walk.file,
                None,
                "",
                "stop",
                "no settings in the file",
                f"format = {FORMAT}, [campaign] and a table for each stage",
                "start from a copy of example_runs/copper_heap",
            )
        )
        return
    found = data.get("format")
    if found != FORMAT or isinstance(found, bool):
        walk.add(
            Problem(
                "",
                None,
                "format",
                "stop",
                "no format number" if found is None else f"format {found!r}",
                f"format = {FORMAT}",
                f"write format = {FORMAT} as the first line",
            ),
            "format",
        )
    for name, content in data.items():
        _check_top_name(walk, name, content)
    if "campaign" not in data:
        walk.add(
            Problem(
                "",
                None,
                "",
                "stop",
                "no table [campaign]",
                "[campaign] with title, metals, reagent",
                'add [campaign] with metals = ["Cu"] and reagent = "H2SO4"',
            ),
            "campaign",
        )


def _check_metals(walk: _Walk, data: Mapping[str, Any]) -> None:
    job = data.get("campaign")
    of_a_metal = [name for name in _OF_A_METAL if name in data]
    if not of_a_metal or not isinstance(job, Mapping) or "metals" in job:
        return
    found = f"metals is missing, and there is [{of_a_metal[0]}]"
    problem = Problem(
        "", None, "campaign.metals", "stop", found, "metals, leading one first", 'metals = ["Cu"]'
    )
    walk.add(problem, "campaign")


def _check_top_name(walk: _Walk, name: str, content: Any) -> None:
    if name == "format":
        return
    known = SCHEMA.children("")
    if name not in known:
        problem = unknown_name(
            "table" if isinstance(content, dict | list) else "key", name, ["format", *known]
        )
        walk.add(problem, name)
    elif not isinstance(content, Mapping | list):
        walk.add(Problem("", None, "", "stop", f"{content!r}", "a table", f"write [{name}]"), name)


def _read_table(walk: _Walk, path: str, content: Mapping[str, Any]) -> None:
    schema = SCHEMA.table(path)
    walk.tables.add(path)
    if schema is None:
        return
    if schema.repeated:
        walk.add(_must_be_repeated(path), path)
        return
    if schema.named:
        walk.named[path] = _read_named(walk, schema, content)
        return
    if schema.free is not None:
        walk.free[path] = _read_free(walk, schema.free, path, content)
        return
    walk.values.update(_read_keys(walk, schema, path, content))


def _must_be_repeated(path: str) -> Problem:
    return Problem("", None, "", "stop", f"[{path}]", f"[[{path}]]", f"write [[{path}]]")


def _read_keys(
    walk: _Walk, schema: TableSchema, path: str, content: Mapping[str, Any]
) -> dict[str, Setting]:
    found: dict[str, Setting] = {}
    for name, raw in content.items():
        dotted = f"{path}.{name}"
        if _is_child(schema, dotted, raw):
            _read_child(walk, dotted, raw)
            continue
        key = schema.key(name)
        if key is None:
            walk.add(unknown_name("key", name, SCHEMA.known_names(path)), dotted)
            continue
        setting = _read_one(walk, key, dotted, raw)
        if setting is not None:
            found[dotted] = setting
    _check_required(walk, schema, path, content)
    return found


def _is_child(schema: TableSchema, dotted: str, raw: Any) -> bool:
    child = SCHEMA.table(dotted)
    if child is None or not isinstance(raw, Mapping | list):
        return False
    both = schema.key(dotted.rsplit(".", 1)[1]) is not None
    return not (both and isinstance(raw, Mapping) and "value" in raw)


def _read_child(walk: _Walk, dotted: str, raw: Any) -> None:
    if isinstance(raw, list):
        _read_repeated(walk, dotted, raw)
    else:
        _read_table(walk, dotted, raw)


def _read_repeated(walk: _Walk, path: str, content: list[Any]) -> None:
    schema = SCHEMA.table(path)
    if schema is None or not schema.repeated:
        walk.add(Problem("", None, "", "stop", f"[[{path}]]", f"[{path}]", f"write [{path}]"), path)
        return
    walk.tables.add(path)
    groups = []
    for position, entry in enumerate(content):
        if not isinstance(entry, Mapping):
            walk.add(_must_be_repeated(path), path)
            continue
        groups.append(_read_group(walk, schema, f"{path}.{position}", entry))
    walk.repeated[path] = tuple(groups)


def _read_group(
    walk: _Walk, schema: TableSchema, place: str, entry: Mapping[str, Any]
) -> dict[str, Setting]:
    found: dict[str, Setting] = {}
    for name, raw in entry.items():
        key = schema.key(name)
        if key is None:
            walk.add(unknown_name("key", name, [k.name for k in schema.keys]), f"{place}.{name}")
            continue
        setting = _read_one(walk, key, f"{place}.{name}", raw)
        if setting is not None:
            found[name] = setting
    _check_required(walk, schema, place, entry)
    for key in schema.keys:
        if key.default is not None and key.name not in found and key.name not in entry:
            found[key.name] = default_setting(key, f"{place}.{key.name}")
    return found


def _read_named(walk: _Walk, schema: TableSchema, content: Mapping[str, Any]) -> dict[str, Group]:
    groups: dict[str, Group] = {}
    for name, entry in content.items():
        place = f"{schema.path}.{quoted(name)}"
        if not isinstance(entry, Mapping):
            walk.add(
                Problem(
                    "",
                    None,
                    "",
                    "stop",
                    f"{entry!r}",
                    "a table",
                    f"write [{place}] with price, per, purity, date",
                ),
                place,
            )
            continue
        groups[name] = _read_group(walk, schema, place, entry)
    return groups


def _read_free(walk: _Walk, key: Key, path: str, content: Mapping[str, Any]) -> dict[str, Setting]:
    found = {}
    for name, raw in content.items():
        setting = _read_one(walk, replace(key, name=name), f"{path}.{quoted(name)}", raw)
        if setting is not None:
            found[name] = setting
    return found


def quoted(name: str) -> str:
    """Return a name as TOML writes it in a dotted key."""
    bare = name and all(c.isascii() and (c.isalnum() or c in "-_") for c in name)
    return name if bare else f'"{name}"'


def _as_written(dotted: str) -> str:
    """Return a dotted key with quotes where it needs them and nowhere else."""
    return ".".join(quoted(part) for part in split_dotted(dotted))


def _read_one(walk: _Walk, key: Key, dotted: str, raw: Any) -> Setting | None:
    try:
        read = read_value(key, raw, loose=walk.is_override(dotted))
    except ValueProblem as error:
        walk.add(error.problem, dotted)
        return None
    return _setting(key, dotted, read, walk.place(dotted)[1], given=True)


def _setting(key: Key, dotted: str, read: Value, line: int | None, given: bool) -> Setting:
    unit = "" if key.unit == "1" else key.unit
    value = read.value
    if key.kind == "number or quantity":
        value, unit = read.value
    return Setting(dotted, value, unit, read.low, read.high, read.source, read.by, line, given)


def default_setting(key: Key, dotted: str) -> Setting:
    """Return the setting for a key that was left out and has a default."""
    return _setting(key, dotted, read_value(key, key.default), None, given=False)


def _check_required(
    walk: _Walk, schema: TableSchema, place: str, content: Mapping[str, Any]
) -> None:
    for key in schema.keys:
        if key.required and key.name not in content:
            allowed = key.meaning + (f" in {key.unit}" if key.unit not in ("", "1") else "")
            walk.add(
                Problem(
                    "",
                    None,
                    f"{place}.{key.name}",
                    "stop",
                    f"{key.name} is missing",
                    allowed,
                    f"add {key.name} = {_example(key)}",
                ),
                place,
            )


def _example(key: Key) -> str:
    if key.unit == "K":
        return '"25 degC"'
    if key.kind in ("quantity", "choice or quantity"):
        return f'"1 {key.unit}"'
    if key.choices:
        return f'"{key.choices[0]}"'
    examples = {"text": '"text"', "texts": '["Cu"]', "fraction": '"95 %"', "date": '"2026-01-31"'}
    return examples.get(key.kind, "1.0")


def _default_tables(walk: _Walk) -> Iterator[str]:
    """The tables whose defaults act: those in the file, and precision and fit with tests."""
    yield from walk.tables
    measured = ("tests", "bench", "column_log", "extraction")
    if {f"tables.{name}" for name in measured} & set(walk.values):
        yield from ({"precision", "fit"} - walk.tables)
    elif "tables.cementation_tests" in walk.values:
        yield from ({"precision"} - walk.tables)


def _put_in_defaults(walk: _Walk) -> None:
    for path in sorted(_default_tables(walk)):
        schema = SCHEMA.table(path)
        if schema is None or schema.repeated or schema.named:
            continue
        for key in schema.keys:
            dotted = f"{path}.{key.name}"
            given_as_table = dotted in walk.tables
            if key.default is not None and dotted not in walk.values and not given_as_table:
                walk.values[dotted] = default_setting(key, dotted)


def assumptions_of(settings: Settings) -> tuple[Assumption, ...]:
    """Return the register of a campaign: defaults used, values marked as assumed, ranges stated."""
    rows = [row for key in settings.values for row in _row_of(settings, key)]
    rows += _group_defaults(settings)
    rows += [_stated(group) for group in settings.repeated.get("assumed", ())]
    rows += [
        _ranged_row(settings, setting)
        for group in settings.free.values()
        for setting in group.values()
        if setting.low is not None
    ]
    return tuple(rows)


def _row_of(settings: Settings, dotted: str) -> Iterator[Assumption]:
    setting = settings.values[dotted]
    table, _, name = dotted.rpartition(".")
    schema = SCHEMA.table(table)
    key = schema.key(name) if schema is not None else None
    if key is None:
        return
    if not setting.given and key.why:
        yield _default_row(setting, key)
    elif setting.low is not None or key.judged:
        yield _ranged_row(settings, setting)


def _group_defaults(settings: Settings) -> Iterator[Assumption]:
    """Yield the defaults used in named and repeated tables, as the basis of a price."""
    named = {path: tuple(groups.values()) for path, groups in settings.named.items()}
    for path, groups in (*named.items(), *settings.repeated.items()):
        schema = SCHEMA.table(path)
        for setting in (setting for group in groups for setting in group.values()):
            key = None if schema is None else schema.key(setting.key.rpartition(".")[2])
            if key is not None and key.why and not setting.given:
                yield _default_row(setting, key)


def _default_row(setting: Setting, key: Key) -> Assumption:
    low, high = (
        None if end is None else float(read_value(key, end).value) for end in (key.low, key.high)
    )
    return Assumption(setting.key, _shown(setting.value), setting.unit, low, high, key.why)


def _shown(value: Any) -> float | str:
    if isinstance(value, tuple):
        floor, part = value
        return f"{part:.3g} of the value" + (f" + {floor:g}" if floor else "")
    return value if isinstance(value, str) else float(value)


def _ranged_row(settings: Settings, setting: Setting) -> Assumption:
    table = setting.key.split(".")[0]
    in_band = setting.has_range and table in ("heap", "tank", "gangue", "rate_law")
    source = setting.source or settings.get(f"{table}.source") or "no source stated"
    by = setting.by or settings.get(f"{table}.by") or "not stated"
    return Assumption(
        setting.key,
        float(setting.value),
        setting.unit,
        setting.low,
        setting.high,
        source,
        by,
        in_band,
    )


def _stated(group: Group) -> Assumption:
    value = group.get("value")
    texts = {
        name: str(group[name].value) if name in group else ""
        for name in ("parameter", "source", "by")
    }
    ends = [group[end].value if end in group else None for end in ("low", "high")]
    return Assumption(
        texts["parameter"],
        value.value if value else "",
        value.unit if value else "",
        ends[0],
        ends[1],
        texts["source"],
        texts["by"],
    )
