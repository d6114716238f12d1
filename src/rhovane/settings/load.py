"""TOML file → frozen settings; every mistake at once, with file, key and remedy."""

from __future__ import annotations

import json
import tomllib
from pathlib import Path
from typing import Any

from pydantic import BaseModel, ValidationError

from rhovane.model import SettingsError
from rhovane.settings.calendar import CalendarEntry, load_calendar
from rhovane.settings.schema import Settings, describe


def load_settings(path: Path) -> Settings:
    """Read the settings file and the calendar it names.

    Raises
    ------
    SettingsError
        A file is missing, is not TOML, or holds mistakes; the message lists all of them.
    """
    try:
        with path.open("rb") as stream:
            raw = tomllib.load(stream)
    except FileNotFoundError:
        raise SettingsError(
            f"{path}: no such settings file. Name one with --config FILE, or run `rhovane demo` to get a worked example."
        ) from None
    except OSError as error:
        raise SettingsError(f"{path}: cannot be read ({error.strerror}).") from error
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise SettingsError(
            f"{path}: not valid TOML: {error}. Nothing was run. Edit the file and retry."
        ) from error
    settings = settings_from(raw, path)
    if settings.calendar.file:
        place = path.parent / settings.calendar.file
        settings = settings.with_calendar(load_calendar(place, settings.series_by_key()))
    return settings


def settings_from(raw: dict[str, Any], path: Path) -> Settings:
    """Settings from a parsed TOML table, without calendar entries; ``path`` is where it came from."""
    if "origin" in raw:
        raise _refusal(path, [("origin", "not a setting")])
    try:
        settings = Settings.model_validate({**raw, "origin": path})
    except ValidationError as error:
        raise _refusal(path, [_mistake(e, raw) for e in _root_causes(error.errors())]) from None
    found = settings.mistakes()
    if found:
        raise _refusal(path, found)
    return settings


def settings_of_text(text: str, path: Path) -> Settings:
    """Settings and calendar from the text that ``Settings.text`` made of them."""
    raw, calendar = json.loads(text)
    return settings_from(raw, path).with_calendar([CalendarEntry.model_validate(entry) for entry in calendar])


def _refusal(path: Path, mistakes: list[tuple[str, str]]) -> SettingsError:
    count = "1 mistake" if len(mistakes) == 1 else f"{len(mistakes)} mistakes"
    lines = "\n".join(f"  {key}: {what}" for key, what in mistakes)
    return SettingsError(f"{path} has {count}:\n{lines}\nNothing was run. Edit the file and retry.")


def _root_causes(errors: list[Any]) -> list[Any]:
    """Without the complaint that a list is too short when only its entries are at fault."""
    places = [e["loc"] for e in errors]
    return [
        e
        for e in errors
        if not (
            e["type"] == "too_short"
            and any(len(p) > len(e["loc"]) and p[: len(e["loc"])] == e["loc"] for p in places)
        )
    ]


def _mistake(error: Any, raw: dict[str, Any]) -> tuple[str, str]:
    where = _key(error["loc"], raw)
    kind = error["type"]
    if kind == "extra_forbidden":
        known = ", ".join(sorted(_fields_at(error["loc"][:-1])))
        return where, f"not a setting; known here: {known}"
    if kind == "missing":
        return where, f"must be given{_meaning(error['loc'])}"
    message = error["msg"].removeprefix("Value error, ")
    given = "" if isinstance(error["input"], dict) else f" (found {describe(error['input'])})"
    return where, f"{message}{given}{_meaning(error['loc'])}"


def _key(loc: tuple[Any, ...], raw: dict[str, Any]) -> str:
    """``source[2] (tivrel).clock`` rather than a tuple of indices."""
    text = ""
    here: Any = raw
    for part in loc:
        try:
            here = here[part]
        except (KeyError, IndexError, TypeError):
            here = None
        if isinstance(part, int):
            name = (
                here.get("name") or here.get("key") or here.get("first") if isinstance(here, dict) else None
            )
            text += f"[{part}]" + (f" ({name})" if name else "")
        else:
            text += ("." if text else "") + str(part)
    return text or "settings"


def _model_at(loc: tuple[Any, ...]) -> type[BaseModel] | None:
    model: type[BaseModel] = Settings
    for part in loc:
        if isinstance(part, int):
            continue
        field = model.model_fields.get(str(part))
        if field is None:
            return None
        inner = _inner_model(field.annotation)
        if inner is None:
            return None
        model = inner
    return model


def _inner_model(annotation: Any) -> type[BaseModel] | None:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    for arg in getattr(annotation, "__args__", ()):
        inner = _inner_model(arg)
        if inner is not None:
            return inner
    return None


def _fields_at(loc: tuple[Any, ...]) -> set[str]:
    model = _model_at(loc)
    return set(model.model_fields) - {"origin"} if model else set()


def _meaning(loc: tuple[Any, ...]) -> str:
    names = [p for p in loc if not isinstance(p, int)]
    model = _model_at(tuple(loc[: loc.index(names[-1])])) if names else None
    field = model.model_fields.get(str(names[-1])) if model else None
    return f". Meaning: {field.description}" if field is not None and field.description else ""
