"""What is wrong with a command line itself, in one line, as for every other mistake."""

from __future__ import annotations

from typing import Any

#: What a kind of value must be, by the validator's name for the mistake.
_MUST = {"float": "must be a number", "int": "must be a whole number", "bool": "must be true or false"}
_BOUNDS = {"greater_than_equal": (">=", "ge"), "less_than_equal": ("<=", "le")}
_BOUNDS |= {"greater_than": (">", "gt"), "less_than": ("<", "lt")}


def usage_line(error: Exception) -> str | None:
    """Return one line about an error of usage; None for anything else, and where help is what is wanted.

    Goes by what such errors carry, not by their class, which differs between versions of the parser.
    """
    if not hasattr(error, "format_message") or type(error).__name__ == "NoArgsIsHelpError":
        return None
    context = getattr(error, "ctx", None)
    command = context.command_path if context is not None else "cnr"
    text = _value(error) or _message(error)
    return f"{command}: {text}{'' if text.endswith('?') else ';'} '{command} --help' shows what there is"


def _value(error: Exception) -> str | None:
    """What is wrong with a value: option, value, what is allowed."""
    details = getattr(error.__cause__, "errors", None)
    if details is None:
        return None
    detail = details()[0]
    kind, text = detail["type"], str(detail["msg"]).removeprefix("Value error, ").rstrip(".")
    if kind in _BOUNDS:
        sign, name = _BOUNDS[kind]
        text = f"must be {sign} {detail['ctx'][name]:g}"
    elif kind.split("_")[0] in _MUST:
        text = _MUST[kind.split("_")[0]]
    elif " is not one of " in text:
        text = f"must be one of {text.split(' is not one of ')[1]}"
    return f"{_name(error)} is {detail['input']!r}, {text}"


def _name(error: Any) -> str:
    parameter = getattr(error, "param", None)
    if parameter is None:
        return "a value"
    options = [name for name in parameter.opts if name.startswith("-")]
    return max(options, key=len) if options else str(parameter.metavar or parameter.name)


def _message(error: Any) -> str:
    text = str(error.format_message()).rstrip(".")
    return text[:1].lower() + text[1:]
