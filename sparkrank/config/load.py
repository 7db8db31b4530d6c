"""Reads a TOML file and `--set` overrides into a checked `Config`."""

import dataclasses
import difflib
import os
import re
import tomllib
from collections.abc import Sequence

from sparkrank.config.sections import SECTIONS, Config, settings_of
from sparkrank.config.settings import Kind, Setting, checked_value, shown_setting
from sparkrank.errors import ConfigError
from sparkrank.places import resolve
from sparkrank.shown import one_line, shown_value

# Two letters at least, so that no drive letter or one-letter name is read as a scheme.
_URI = re.compile(r"[A-Za-z][A-Za-z0-9+.-]+:")
_OVERRIDE = re.compile(r"([^.=\s]+)\.([^.=\s]+)=(.*)", re.DOTALL)


@dataclasses.dataclass(frozen=True, kw_only=True)
class _Given:
    """A value somebody set, and where: "config.toml" or "--set"."""

    value: object
    where: str


def load_config(path: str | None, overrides: Sequence[str] = (), *, local_master: bool = True) -> Config:
    """The configuration of a TOML file with `section.key=value` overrides on top; later overrides win.

    Relative paths are taken from the file's folder (without a file, from the working folder) and refused
    unless `local_master`, since executors elsewhere have other folders. URIs pass unchanged.

    Raises ConfigError, one line that names `section.key`, for a file that cannot be read, an unknown section
    or key, a missing required key, a wrong type, or a value out of range.
    """
    given = _read_file(path) if path is not None else {}
    for override in overrides:
        section, key, value = _parse_override(override)
        given[section, key] = _Given(value=value, where="--set")
    base = os.path.dirname(os.path.abspath(path)) if path is not None else os.getcwd()
    sections = {}
    for section, cls in SECTIONS.items():
        values = {}
        for key, (declared, default) in settings_of(section).items():
            name = f"{section}.{key}"
            found = given.get((section, key))
            if found is None and default is dataclasses.MISSING:
                raise ConfigError(
                    f"{name} is missing: expected {declared.expected}, found nothing; "
                    f"write it under [{section}] in the configuration or give --set {name}=…"
                )
            value = default if found is None else _checked(name, declared, default, found)
            if declared.kind is Kind.PATH and isinstance(value, str):
                value = _resolved(name, value, base, local_master)
            values[key] = value
        sections[section] = cls(**values)
    return Config(**sections)


def _read_file(path: str) -> dict[tuple[str, str], _Given]:
    shown = shown_value(path)
    try:
        with open(path, "rb") as file:
            # Some editors write a byte order mark, which TOML itself does not know.
            document = tomllib.loads(file.read().decode("utf-8-sig"))
    except FileNotFoundError:
        raise ConfigError(
            f"configuration {shown}: expected a TOML file, found nothing there; check --config"
        ) from None
    except (OSError, ValueError, RecursionError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else one_line(error)
        raise ConfigError(
            f"configuration {shown}: expected a readable TOML file, found: {reason}; correct the file"
        ) from None
    given = {}
    for section, keys in document.items():
        if not isinstance(keys, dict):
            _refuse_outside_section(section, shown)
        for key, value in keys.items():
            _check_known(section, key, shown)
            given[section, key] = _Given(value=value, where=shown)
        if not keys:
            _check_section(section, shown)
    return given


def _parse_override(override: str) -> tuple[str, str, object]:
    match = _OVERRIDE.fullmatch(override)
    if match is None:
        raise ConfigError(
            f'--set "{shown_value(override)}": expected section.key=value, found another form; '
            "write for example --set solve.damping=0.85"
        )
    section, key, text = match.groups()
    _check_known(section, key, "--set")
    declared, _ = settings_of(section)[key]
    return section, key, _override_value(declared, text)


def _override_value(declared: Setting, text: str) -> object:
    """The text as a TOML value, else as it stands.

    Where a text is expected only a quoted one is read as TOML: `run.id=2026-11-01` means the text, though
    TOML would read a date.
    """
    try:
        document = tomllib.loads(f"value = {text}")
    except (ValueError, RecursionError):
        return text
    value = document["value"]
    is_text = declared.kind in (Kind.TEXT, Kind.PATH)
    if len(document) > 1 or (is_text and not isinstance(value, str)):
        return text
    return value


def _checked(name: str, declared: Setting, default: object, given: _Given) -> object:
    try:
        return checked_value(declared, given.value)
    except ValueError as error:
        remedy = "" if default is dataclasses.MISSING else f" or leave it out for {shown_setting(default)}"
        raise ConfigError(f"{name} in {given.where}: {error}; change it{remedy}") from None


def _resolved(name: str, value: str, base: str, local_master: bool) -> str:
    if not value:
        return value
    is_uri = _URI.match(value) is not None
    if not is_uri and not os.path.isabs(value) and not local_master:
        raise ConfigError(
            f'{name}: expected an absolute path or a URI, found "{shown_value(value)}"; '
            "relative paths work with a local master only"
        )
    resolved = value if is_uri else os.path.normpath(os.path.join(base, value))
    try:
        resolve(resolved)
    except ConfigError as error:
        raise ConfigError(f"{name}: {error}") from None
    return resolved


def _check_known(section: str, key: str, where: str) -> None:
    _check_section(section, where)
    keys = settings_of(section)
    if key not in keys:
        everywhere = [f"{other}.{name}" for other in SECTIONS for name in settings_of(other)]
        near = [name for name in everywhere if name.endswith(f".{key}")]
        near = near or [f"{section}.{name}" for name in difflib.get_close_matches(key, keys, n=1)]
        raise ConfigError(
            f"{section}.{shown_value(key)} in {where}: expected one of {', '.join(keys)}, "
            f"found an unknown key; {_suggestion(near)}"
        )


def _check_section(section: str, where: str) -> None:
    if section not in SECTIONS:
        near = difflib.get_close_matches(section, SECTIONS, n=1)
        raise ConfigError(
            f"section {shown_value(section)} in {where}: expected one of {', '.join(SECTIONS)}, "
            f"found an unknown section; {_suggestion(near)}"
        )


def _refuse_outside_section(key: str, where: str) -> None:
    if key in SECTIONS:
        raise ConfigError(
            f"section {key} in {where}: expected a table, found a single value; write [{key}] on its own line"
        )
    names = {name: f"{section}.{name}" for section in SECTIONS for name in settings_of(section)}
    near = [names[name] for name in difflib.get_close_matches(key, names, n=1)]
    raise ConfigError(
        f"{shown_value(key)} in {where}: expected every key under a section, found it outside; "
        f"{_suggestion(near)}"
    )


def _suggestion(near: Sequence[str]) -> str:
    return f"did you mean {near[0]}?" if near else "remove it"
