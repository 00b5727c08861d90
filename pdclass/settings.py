"""Settings from TOML to validated, frozen objects; and where the shipped data folders are."""

from __future__ import annotations

import difflib
import tomllib
from collections.abc import Sequence
from pathlib import Path
from typing import TypeVar

from pydantic import BaseModel, ConfigDict, ValidationError

from pdclass.errors import InputError

_LONGEST_FOUND = 100
_PACKAGE = Path(__file__).resolve().parent

Model = TypeVar("Model", bound="Settings")


class Settings(BaseModel):
    """A frozen set of settings; a key that it does not know is an error, and so is a number that is not finite."""

    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False)


def shipped(kind: str) -> Path:
    """The folder of shipped data (`models` or `synthetic`): in the wheel, else in the checkout.

    Raises
    ------
    InputError
        If the installation lacks it.
    """
    for folder in (_PACKAGE / kind, _PACKAGE.parent / kind):
        if folder.is_dir():
            return folder
    raise InputError(f"{_PACKAGE / kind}: the shipped folder '{kind}' is missing; install pdclass again")


def read_settings(path: Path, model: type[Model]) -> Model:
    """Settings of the given kind from a TOML file.

    Raises
    ------
    InputError
        If the file cannot be read, is no TOML, or holds an unknown key (the nearest known one is named)
        or a value out of bounds.
    """
    try:
        content = tomllib.loads(path.read_text(encoding="utf-8-sig"))
    except (OSError, UnicodeDecodeError, tomllib.TOMLDecodeError) as error:
        raise InputError(f"{path}: not readable as TOML: {error}") from None
    try:
        return model.model_validate(content)
    except ValidationError as error:
        raise InputError(f"{path}: {_first_complaint(error, model)}") from None


def _first_complaint(error: ValidationError, model: type[Settings]) -> str:
    first = error.errors()[0]
    where = ".".join(str(part) for part in first["loc"]) or "the whole"
    if first["type"] != "extra_forbidden":
        # a whole table would hide what is said of it
        found = repr(first["input"])
        said = f"{where}: {first['msg'].removeprefix('Value error, ')}"
        return f"{said}, found {found}" if len(found) <= _LONGEST_FOUND else said
    odd, here = str(first["loc"][-1]), _fields_at(model, first["loc"][:-1])
    near = difflib.get_close_matches(odd, here, n=1) or difflib.get_close_matches(
        odd, _known_keys(model), n=1, cutoff=0.0
    )
    return f"{where}: unknown key; the nearest known one is '{near[0]}'"


def _fields_at(model: type[BaseModel], place: Sequence[int | str]) -> list[str]:
    """Names of the fields of the table at a place within settings."""
    for name in place:
        if isinstance(name, str) and name in model.model_fields:
            annotation = model.model_fields[name].annotation
            inner = [one for one in (annotation, *getattr(annotation, "__args__", ())) if isinstance(one, type)]
            model = next((one for one in inner if issubclass(one, BaseModel)), model)
    return list(model.model_fields)


def _known_keys(model: type[BaseModel]) -> list[str]:
    keys = list(model.model_fields)
    for field in model.model_fields.values():
        for inner in [field.annotation, *getattr(field.annotation, "__args__", ())]:
            if isinstance(inner, type) and issubclass(inner, BaseModel):
                keys += _known_keys(inner)
    return keys
