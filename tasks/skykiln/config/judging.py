"""Judging an entry of pipeline.yaml by itself, so that all of its mistakes show at once.

A wrong key is reported and the rest of its entry judged on without it.
"""

import difflib

from .problems import validated


def judged(model, entry, path, report, mended):
    """(object, paths that were wrong); the object is what the rest makes, None if that makes none.

    Parameters: mended : function that puts stand-ins where something needed was wrong or is missing
    """
    wrong = set()

    def note(steps, text):
        report(steps, text)
        wrong.add(steps[len(path) :])

    found = validated(model, entry, path, note)
    if found is None and isinstance(entry, dict):
        found = validated(model, mended(_without(entry, wrong)), path, lambda steps, text: None)
    return found, wrong


def doubtful(wrong, section, *keys):
    """Whether what the user meant by one of the keys of a section is not known: it was wrong, the whole
    section was, or an unknown key is near enough to be a slip for it."""
    if any(section[: len(path)] == path for path in wrong):
        return True
    found = [path[-1] for path in wrong if path[:-1] == section]
    return any(difflib.get_close_matches(str(key), keys, n=1, cutoff=0.6) for key in found)


def _without(data, wrong, path=()):
    """Data without the values of mappings to which the paths in `wrong` lead."""
    if isinstance(data, dict):
        steps = {key: (*path, key) for key in data}
        return {key: _without(data[key], wrong, steps[key]) for key in data if steps[key] not in wrong}
    if isinstance(data, list):
        return [_without(item, wrong, (*path, index)) for index, item in enumerate(data)]
    return data
