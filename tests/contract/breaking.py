"""Which changes of an interface description break clients: rules of our own, in one place.

What clients send may be admitted more widely, never more narrowly; what they receive may say more,
never less. Enumerations in answers may grow: the description tells clients to expect it.
"""

from collections.abc import Iterator, Mapping
from typing import Any

Json = Any
BOUNDS_BELOW = ("minimum", "minLength", "minItems", "minProperties", "exclusiveMinimum")
BOUNDS_ABOVE = ("maximum", "maxLength", "maxItems", "maxProperties", "exclusiveMaximum")
METHODS = ("get", "put", "post", "delete", "patch", "head", "options")


def breaking_changes(former: Json, latter: Json) -> list[str]:
    """Return every breaking change from ``former`` to ``latter``, each in a sentence."""
    return sorted(set(_paths(former, latter)))


def _paths(former: Json, latter: Json) -> Iterator[str]:
    for path, item in former["paths"].items():
        for method in METHODS:
            if method not in item:
                continue
            place = f"{method.upper()} {path}"
            operation = latter["paths"].get(path, {}).get(method)
            if operation is None:
                yield f"{place}: is gone"
                continue
            if operation.get("operationId") != item[method].get("operationId"):
                yield f"{place}: has another operationId"
            yield from _parameters(place, former, latter, item[method], operation)
            yield from _body(place, former, latter, item[method], operation)
            yield from _answers(place, former, latter, item[method], operation)


def _parameters(place: str, former: Json, latter: Json, old: Json, new: Json) -> Iterator[str]:
    before = {(each["in"], each["name"]): each for each in old.get("parameters", [])}
    after = {(each["in"], each["name"]): each for each in new.get("parameters", [])}
    for key, parameter in after.items():
        required = parameter.get("required", False)
        if required and not before.get(key, {"required": False}).get("required", False):
            yield f"{place}: parameter {key[1]} is required now"
    for key, parameter in before.items():
        if key not in after:
            yield f"{place}: parameter {key[1]} is gone"
        else:
            at = f"{place}: parameter {key[1]}"
            schemas = parameter.get("schema", {}), after[key].get("schema", {})
            yield from Narrower(former, latter).changes(at, *schemas)


def _body(place: str, former: Json, latter: Json, old: Json, new: Json) -> Iterator[str]:
    before, after = old.get("requestBody", {}), new.get("requestBody", {})
    if after.get("required", False) and not before.get("required", False):
        yield f"{place}: a body is required now"
    for media_type, content in before.get("content", {}).items():
        if media_type not in after.get("content", {}):
            yield f"{place}: a body as {media_type} is no longer read"
        else:
            schemas = content.get("schema", {}), after["content"][media_type].get("schema", {})
            yield from Narrower(former, latter).changes(f"{place}: body", *schemas)


def _answers(place: str, former: Json, latter: Json, old: Json, new: Json) -> Iterator[str]:
    for status, response in old["responses"].items():
        after = new["responses"].get(status)
        if after is None:
            # A problem that cannot happen any more breaks nobody; an answer that is gone does.
            if status < "400":
                yield f"{place}: answer {status} is gone"
            continue
        for header in response.get("headers", {}):
            if header not in after.get("headers", {}):
                yield f"{place}: answer {status} has no header {header} any more"
        for media_type, content in response.get("content", {}).items():
            if media_type not in after.get("content", {}):
                yield f"{place}: answer {status} is not offered as {media_type} any more"
            else:
                schemas = content.get("schema", {}), after["content"][media_type].get("schema", {})
                yield from Wider(former, latter).changes(f"{place}: answer {status}", *schemas)


class _Comparison:
    """Walks two schemas side by side, following references, each pair of them once."""

    def __init__(self, former: Json, latter: Json) -> None:
        """Compare schemas of ``former`` with schemas of ``latter``."""
        self._former = former
        self._latter = latter
        self._seen: set[tuple[str, str]] = set()

    def changes(self, place: str, old: Json, new: Json) -> Iterator[str]:
        """Yield the breaking changes between two schemas."""
        names = str(old.get("$ref", "")), str(new.get("$ref", ""))
        if any(names):
            if names in self._seen:
                return
            self._seen.add(names)
        old, new = _resolved(self._former, old), _resolved(self._latter, new)
        yield from self.own_changes(place, old, new)
        for name, part in old.get("properties", {}).items():
            if name in new.get("properties", {}):
                yield from self.changes(f"{place}.{name}", part, new["properties"][name])
        for key in ("items", "additionalProperties"):
            if isinstance(old.get(key), Mapping) and isinstance(new.get(key), Mapping):
                yield from self.changes(f"{place}[]", old[key], new[key])
        for key in ("anyOf", "oneOf", "allOf", "prefixItems"):
            # By position: the documents are generated, so that what stays keeps its place.
            for before, after in zip(old.get(key, []), new.get(key, []), strict=False):
                yield from self.changes(place, before, after)

    def own_changes(self, place: str, old: Json, new: Json) -> Iterator[str]:
        """Yield the breaking changes of the two schemas themselves."""
        raise NotImplementedError


class Narrower(_Comparison):
    """For what clients send: nothing may be refused that was admitted."""

    def own_changes(self, place: str, old: Json, new: Json) -> Iterator[str]:
        """Yield what is refused now."""
        if "type" in new and not _types(old) <= _types(new):
            yield f"{place}: may not be of every former type any more"
        if "enum" in new and ("enum" not in old or not set(old["enum"]) <= set(new["enum"])):
            yield f"{place}: former values are refused now"
        for required in set(new.get("required", [])) - set(old.get("required", [])):
            yield f"{place}: {required} is required now"
        yield from _closed(place, old, new)
        yield from _narrower_bounds(place, old, new)
        for key in ("pattern", "format", "const"):
            if key in new and new[key] != old.get(key):
                yield f"{place}: {key} is another now"
        for key in ("anyOf", "oneOf"):
            if len(new.get(key, [])) < len(old.get(key, [])) or (key in new and key not in old):
                yield f"{place}: has fewer alternatives now"


class Wider(_Comparison):
    """For what clients receive: nothing that they could rely on may be gone."""

    def own_changes(self, place: str, old: Json, new: Json) -> Iterator[str]:
        """Yield what cannot be relied on any more."""
        if "type" in old and not _types(new) <= _types(old):
            yield f"{place}: may be of another type now"
        for gone in set(old.get("properties", {})) - set(new.get("properties", {})):
            yield f"{place}: {gone} is gone"
        for optional in set(old.get("required", [])) - set(new.get("required", [])):
            yield f"{place}: {optional} may be absent now"
        for key in ("pattern", "format", "const"):
            if key in old and new.get(key) != old[key]:
                yield f"{place}: {key} is another now"
        for key in ("anyOf", "oneOf"):
            if len(new.get(key, [])) > len(old.get(key, [])):
                yield f"{place}: has more alternatives now"


def _closed(place: str, old: Json, new: Json) -> Iterator[str]:
    if new.get("additionalProperties", True) is False:
        for gone in set(old.get("properties", {})) - set(new.get("properties", {})):
            yield f"{place}: {gone} is refused now"
        if old.get("additionalProperties", True) is not False:
            yield f"{place}: unknown members are refused now"


def _narrower_bounds(place: str, old: Json, new: Json) -> Iterator[str]:
    for bound in BOUNDS_BELOW:
        if bound in new and (bound not in old or new[bound] > old[bound]):
            yield f"{place}: {bound} is narrower now"
    for bound in BOUNDS_ABOVE:
        if bound in new and (bound not in old or new[bound] < old[bound]):
            yield f"{place}: {bound} is narrower now"


def _types(schema: Json) -> set[str]:
    types = schema.get(
        "type", ["null", "boolean", "object", "array", "number", "integer", "string"]
    )
    found = {types} if isinstance(types, str) else set(types)
    return found | {"integer"} if "number" in found else found


def _resolved(document: Json, schema: Json) -> Json:
    while "$ref" in schema:
        found = document
        for name in schema["$ref"].removeprefix("#/").split("/"):
            found = found[name]
        schema = found
    return schema
