"""Names of probes are folders below build_dir: which are safe, and which can't stand side by side."""

import unicodedata

LONGEST_PART = 180  # bytes; file systems allow 255, and stages add their own suffixes


def name_fault(name: str) -> str | None:
    """Why a name can't be a folder below build_dir, or None."""
    if any(not character.isprintable() for character in name):
        return "a name may not hold unprintable characters"
    if "\\" in name:
        return "a name may not hold a backslash"
    for part in name.split("/"):
        if not part.strip():
            return "a name may not be empty, nor start or end with '/', nor hold '//'"
        if part.startswith("."):
            return f"a part of a name may not start with a dot, as {part!r} does"
        if len(part.encode()) > LONGEST_PART:
            return f"a part of a name may hold at most {LONGEST_PART} bytes"
    return None


def folded(name: str) -> str:
    """What a file system that ignores case and composition of characters takes a name for."""
    return unicodedata.normalize("NFC", unicodedata.normalize("NFC", name).casefold())


def clashes(names):
    """Pairs of names that can't stand side by side.

    Parameters: names : list of names, in the order in which they were asked for
    Returns:    list of (index of the later name, sentence)
    """
    first, found = {}, []
    for index, name in enumerate(names):
        key = folded(name)
        if key not in first:
            first[key] = name
        elif first[key] == name:
            found.append((index, f"the probe '{name}' is already made by another file or entry"))
        else:
            found.append((index, f"'{name}' and '{first[key]}' are one folder where case is ignored"))
    for index, name in enumerate(names):
        parts = folded(name).split("/")
        for end in range(1, len(parts)):
            parent = first.get("/".join(parts[:end]))
            if parent is not None:
                found.append((index, f"'{parent}' is a probe, so '{name}' can't lie in its folder"))
    return found
