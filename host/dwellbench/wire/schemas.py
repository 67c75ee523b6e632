"""Every line that is sent or received is checked against its schema, compiled once a process.

Only the packaged schemas are compiled, never one that came from a box. The message's kind picks the schema, so that a failure
names the member that is wrong.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from functools import cache
from typing import Any

import fastjsonschema

from dwellbench import assets

Checker = Callable[[Any], Any]


class WrongMessage(ValueError):
    """A message that its schema does not allow."""


@cache
def checker(name: str) -> Checker:
    """The compiled schema `name`, such as "event.samples"."""
    path = assets.protocol() / "schemas" / f"{name}.json"
    schema = json.loads(path.read_text(encoding="utf-8"))
    compiled: Checker = fastjsonschema.compile(
        schema, use_default=False, handlers={"http": _deny, "https": _deny, "": _deny}
    )
    return compiled


def compile_all() -> None:
    """Compile what is not yet: a tenth of a second once a process, which is better not spent while a box waits for a sign of life."""
    for name in sorted(known()):
        checker(name)


def _deny(uri: str) -> Any:
    raise WrongMessage(f"a schema may not refer to {uri}")


@cache
def known() -> frozenset[str]:
    """The names of all schemas."""
    return frozenset(path.stem for path in (assets.protocol() / "schemas").glob("*.json"))


def check(name: str, message: dict[str, Any]) -> None:
    """Raise WrongMessage when `message` is not what the schema `name` says."""
    if name not in known():
        raise WrongMessage(f"there is no message {name!r}")
    try:
        checker(name)(message)
    except fastjsonschema.JsonSchemaValueException as error:
        raise WrongMessage(f"{name}: {error.message}") from None
