"""Settings as they were and as they are, in words: 'roughness was 0.4286, is 0.4'."""

import json


def setting_reasons(recorded: dict, asked: dict):
    """A sentence for every setting that differs."""
    if recorded == asked:
        return
    for name in sorted(recorded.keys() | asked.keys()):
        if name not in asked:
            yield f"{name} is no longer a setting"
        elif name not in recorded:
            yield f"{name} is a new setting"
        else:
            yield from _differences(name, recorded[name], asked[name])


def _differences(name, before, after):
    if before == after:
        return
    if isinstance(before, dict) and isinstance(after, dict):
        yield from _key_differences(name, before, after)
    elif _are_named(before) and _are_named(after):
        yield from _key_differences(name, _by_name(before), _by_name(after))
    else:
        yield "{} was {}, is {}".format(name, *_shown(before, after))


def _key_differences(name, before, after):
    """Mappings, and lists of mappings with names, differ by what they hold."""
    gone, new = before.keys() - after.keys(), after.keys() - before.keys()
    for key in sorted(before.keys() | after.keys()):
        if key in gone:
            yield f"{name}: {key} is gone"
        elif key in new:
            yield f"{name}: {key} is new"
        else:
            yield from _differences(f"{name}: {key}", before[key], after[key])


def _by_name(entries):
    return {each["name"]: each for each in entries}


def _are_named(value):
    return isinstance(value, list) and all(isinstance(each, dict) and "name" in each for each in value)


def _shown(before, after):
    """Two values as text, short where that tells them apart."""
    short = _short(before), _short(after)
    return short if short[0] != short[1] else (repr(before), repr(after))


def _short(value):
    if isinstance(value, list):
        return f"[{', '.join(map(_short, value))}]"
    if isinstance(value, float):
        return f"{value:.4g}" if abs(value) < 1e4 else f"{value:.6g}"
    return value if isinstance(value, str) else json.dumps(value, ensure_ascii=False)
