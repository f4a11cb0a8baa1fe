"""pydantic's errors -> sentences: what was found, what is allowed, the nearest known key."""

import difflib
import functools
import json

from pydantic import ValidationError

BOUNDS = {
    "exclusiveMinimum": "above",
    "minimum": "from",
    "exclusiveMaximum": "below",
    "maximum": "at most",
}

# Errors whose own sentence says more than a list of what is allowed.
OWN_SENTENCES = ("own",)


def validated(model, data, path, report):
    """An object of `model` made from `data`, or None after `report(path, text)` for each mistake."""
    try:
        return model.model_validate(data)
    except ValidationError as error:
        for fault in error.errors(include_url=False):
            inner = _steps_in_data(fault["loc"], data)
            report((*path, *inner), _sentence(fault, model, inner))
    return None


def nearest(word, known):
    """The sentence that offers the known word nearest to `word`, or all of them when none is near."""
    known = list(known)
    close = difflib.get_close_matches(word, known, n=1, cutoff=0.6)
    if close:
        return f"did you mean '{close[0]}'?"
    more = f" and {len(known) - 12} more" if len(known) > 12 else ""
    return f"known here: {', '.join(known[:12]) or 'none'}{more}"


def shown(value):
    """A value of the file as a message shows it."""
    if value is None:
        return "nothing"
    if isinstance(value, dict | list):
        kind = "mapping" if isinstance(value, dict) else "list"
        return f"a {kind}" if value else f"an empty {kind}"
    text = repr(value) if isinstance(value, str) else json.dumps(value)
    return text if len(text) <= 60 else text[:56] + " ..."


def dotted(path):
    """A path of keys and indices as one text: `recipes.landmark.pack[0].pixels`."""
    text = ""
    for step in path:
        text += f"[{step}]" if isinstance(step, int) else f".{_key(step)}"
    return text.removeprefix(".")


def _key(key):
    plain = key and "." not in key and key == key.strip() and len(key) <= 80
    return key if plain else repr(key)[:80]


def printable(text):
    """The text on one line: characters that a terminal can't show are written as escapes."""
    if text.isprintable():
        return text
    return "".join(char if char.isprintable() else ascii(char)[1:-1] for char in text)


def _steps_in_data(location, data):
    """pydantic's location without the steps that name a branch of a union; a missing key stays."""
    steps = []
    for step in location:
        fits_list = isinstance(data, list) and isinstance(step, int) and step < len(data)
        if isinstance(data, dict) or fits_list:
            steps.append(step)
            data = data[step] if fits_list else data.get(step)
    return tuple(steps)


def _sentence(fault, model, inner):
    kind, value = fault["type"], fault["input"]
    if kind in OWN_SENTENCES:
        return fault["msg"]
    if kind == "extra_forbidden":
        section = _branch(_schema_at(model, inner[:-1]), _schema(model))
        return f"unknown key; {nearest(inner[-1], section.get('properties', ()))}"
    schema = _schema_at(model, inner)
    if kind == "missing":
        return f"missing. {schema.get('description', 'The key is needed.')}"
    return f"found {shown(value)}; allowed: {_allowed(schema)}"


@functools.cache
def _schema(model):
    return model.model_json_schema()


def _schema_at(model, inner):
    """The JSON Schema of the value that a path leads to."""
    whole = _schema(model)
    node = whole
    for step in inner:
        node = _branch(_resolved(node, whole), whole)
        if isinstance(step, int):
            node = node.get("items", {})
        else:
            node = node.get("properties", {}).get(step) or node.get("additionalProperties", {})
    return _resolved(node, whole)


def _resolved(node, whole):
    if "$ref" in node:
        target = whole["$defs"][node["$ref"].rpartition("/")[2]]
        return {**target, **{key: value for key, value in node.items() if key != "$ref"}}
    return node


def _branch(node, whole):
    """Of alternatives the one that has parts of its own."""
    branches = (_resolved(branch, whole) for branch in node.get("anyOf", ()))
    return next((branch for branch in branches if "properties" in branch or "items" in branch), node)


def _allowed(schema):
    """What a value may be, in words, from its JSON Schema."""
    if "examples" in schema:
        number, *texts = schema["examples"]
        return f"a number of bytes such as {number}, or a size such as {' or '.join(texts)}"
    if "anyOf" in schema:
        return " or ".join(_allowed(branch) for branch in schema["anyOf"])
    if "enum" in schema or "const" in schema:
        return ", ".join(str(word) for word in schema.get("enum", [schema.get("const")]))
    return "a mapping" if "$ref" in schema else ALLOWED[schema["type"]](schema)


def _allowed_number(schema):
    noun = "a whole number" if schema["type"] == "integer" else "a number"
    if "minimum" in schema and "maximum" in schema:
        return f"{noun} from {schema['minimum']:.10g} to {schema['maximum']:.10g}"
    words = [f"{word} {schema[key]:.10g}" for key, word in BOUNDS.items() if key in schema]
    return " ".join([noun, *words[:1], *(f"and {word}" for word in words[1:])])


def _allowed_list(schema):
    least = f" with at least {schema['minItems']} item" if "minItems" in schema else ""
    if "minItems" in schema and schema["minItems"] == schema.get("maxItems"):
        least = f" with {schema['minItems']} items"
    each = f", each {_allowed(schema['items'])}" if "type" in schema["items"] else ""
    return f"a list{least}{each}"


def _allowed_text(schema):
    return f"text that matches {schema['pattern']}" if "pattern" in schema else "text"


ALLOWED = {
    "number": _allowed_number,
    "integer": _allowed_number,
    "array": _allowed_list,
    "string": _allowed_text,
    "boolean": lambda schema: "true or false",
    "object": lambda schema: "a mapping",
    "null": lambda schema: "null",
}
