"""Say in our own words what is wrong with a key of a column file, and how to mend it."""

from collections.abc import Mapping
from typing import Any, Final, TypeAlias

from .glossary import meaning
from .problems import Problems, brief, nearest

Keys: TypeAlias = dict[str, dict[str, dict[str, str]]]
"""Table -> kind ("" where it has none) -> key -> description."""

_KIND_DEPTH: Final = {"levels": 1, "wind": 1, "reference": 1, "air": 2}
_WHAT: Final = {
    "float_type": "must be a number",
    "int_type": "must be a whole number, written without a point",
    "int_from_float": "must be a whole number",
    "string_type": "must be a text in quotes",
    "list_type": "must be a list in square brackets",
    "dict_type": "must be a table",
    "model_type": "must be a table",
    "model_attributes_type": "must be a table",
    "finite_number": "must be a finite number",
    "string_too_short": "must not be empty",
    "string_too_long": "must have at most {max_length} characters",
    "greater_than": "must be greater than {gt:g}",
    "greater_than_equal": "must be at least {ge:g}",
    "less_than": "must be less than {lt:g}",
    "less_than_equal": "must be at most {le:g}",
    "too_short": "must have at least {min_length} entries",
    "too_long": "must have at most {max_length} entries",
    "literal_error": "must be one of {expected}",
}

_MEND: Final = {
    "greater_than": "; write a larger value",
    "greater_than_equal": "; write a larger value",
    "less_than": "; write a smaller value",
    "less_than_equal": "; write a smaller value",
    "float_type": "; write it without quotes, as 1000.0",
    "int_type": "; write it as 40",
    "list_type": "; write it as [0.0, 100.0]",
    "finite_number": "; write a number",
}


def _variants(annotation: Any) -> list[Any]:
    """Every table model that an annotation of the file's model may hold."""
    if hasattr(annotation, "model_fields"):
        return [annotation]
    inner = getattr(annotation, "__args__", ())
    return [model for part in inner for model in _variants(part)]


def keys_of(model: Any) -> Keys:
    """Describe every key of the file's model, table by table and kind by kind."""
    found: Keys = {}
    for name, field in model.model_fields.items():
        found[name] = {}
        for variant in _variants(field.annotation):
            kind = variant.model_fields.get("kind")
            tag = kind.annotation.__args__[0] if kind is not None else ""
            meanings = {key: meaning(variant.__name__, key) for key in variant.model_fields}
            found[name][tag] = meanings
    return found


def unit_hint(key: str, value: object) -> str:
    """Suggest the conversion where a value tells that it is in another unit."""
    if isinstance(value, bool) or not isinstance(value, int | float):
        return ""
    if key.endswith("_k") and -130.0 < value < 70.0:
        return f"; it looks like degrees Celsius: write {value + 273.15:.2f}"
    if key.endswith("_pa") and 20.0 <= value < 2000.0:
        return f"; it looks like hPa: write {value * 100.0:.1f}"
    return ""


def _path(location: tuple[int | str, ...], single_air: bool) -> tuple[str, str]:
    """Key path as a user writes it, and the kind of its table ("" where it has none)."""
    depth = _KIND_DEPTH.get(str(location[0]), 0)
    kind = str(location[depth]) if depth and len(location) > depth else ""
    parts = [part for i, part in enumerate(location) if not (kind and i == depth)]
    if single_air and parts[0] == "air" and len(parts) > 1:
        del parts[1]
    text = ""
    for part in parts:
        word = brief(str(part), 60)
        text += f"[{part}]" if isinstance(part, int) else f".{word}" if text else word
    return text, kind


def _wrong_key(known: Keys, top: str, kind: str, key: str) -> str:
    kinds = known[top]
    others = [other for other, names in kinds.items() if key in names and other != kind]
    if others:
        return f'not a key of kind "{kind}" but of "{others[0]}"; remove it or change the kind'
    return f"unknown key; {nearest(key, kinds.get(kind, {}))}"


def _suggest(word: object, choices: list[str]) -> str:
    near = nearest(word, choices) if isinstance(word, str) else ""
    return f"; {near}" if near.startswith("did you mean") else ""


def _wrong_kind(
    error: Mapping[str, Any], path: str, choices: list[str], problems: Problems
) -> None:
    listed = ", ".join(f'"{name}"' for name in choices)
    given = error["input"].get("kind") if isinstance(error["input"], Mapping) else None
    if given is None:
        problems.add(f"{path}.kind", f"this key is missing; it must be one of {listed}")
    else:
        problems.add(f"{path}.kind", f"must be one of {listed}{_suggest(given, choices)}", given)


def explain(error: Mapping[str, Any], known: Keys, problems: Problems, *, single_air: bool) -> None:
    """Add one mistake of shape, type or range.

    Parameters
    ----------
    error : mapping
        ``loc`` (keys and indices from the top), ``type``, ``input`` and ``ctx`` of the mistake.
    known : Keys
        Every key of the file.
    problems : Problems
        Where the mistake is added.
    single_air : bool
        Whether the file has one [air] table, so that its index need not be named.
    """
    location, what, value = error["loc"], error["type"], error["input"]
    path, kind = _path(location, single_air)
    top = str(location[0])
    key = next((str(part) for part in reversed(location) if isinstance(part, str)), "")
    description = known.get(top, {}).get(kind, {}).get(key, "")
    described = f" ({description})" if description else ""
    if what == "missing" and len(location) == 1:
        problems.add(path, f"this table is missing; add [{top}]")
    elif what == "missing":
        problems.add(path, f"this key is missing; add it{described}")
    elif what == "extra_forbidden" and len(location) == 1:
        problems.add(path, f"unknown key; {nearest(key, known)}")
    elif what == "extra_forbidden":
        problems.add(path, _wrong_key(known, top, kind, key))
    elif what in ("union_tag_not_found", "union_tag_invalid"):
        _wrong_kind(error, path, list(known.get(top, {})), problems)
    else:
        context = error.get("ctx", {})
        text = _WHAT.get(what, str(error["msg"])).format(**context)
        if what == "literal_error":
            choices = str(context.get("expected", "")).replace(" or ", ", ").split(", ")
            described = _suggest(value, [word.strip("'") for word in choices])
        mend = unit_hint(key, value) or _MEND.get(what, "")
        problems.add(path, f"{text}{mend}{described}", value)
