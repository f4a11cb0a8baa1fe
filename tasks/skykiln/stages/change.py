"""How a probe that is to be published differs from what stands published of it."""

import io
from pathlib import Path

from ..engine.digests import read_json

# A picture of nothing: the smallest PNG. A stage always writes what it says it writes.
NO_PICTURE = bytes.fromhex(
    "89504e470d0a1a0a0000000d4948445200000001000000010100000000376ef9240000000a494441"
    "5478da6360000000020001e527defc0000000049454e44ae426082"
)


def published_thumbnails(pinned) -> str:
    """Where the small copy lies of the chain that stands published."""
    return f"{pinned.work}/published.npy"


def change_of(record, thumbnails, pinned) -> tuple[dict | None, bytes]:
    """The change that publishing would make, and a picture of it.

    Parameters: record : the values of probe.json to be; thumbnails : Input
    Returns:    None and an empty picture where nothing is published, or where no texel changes
    """
    before = read_json(Path(pinned.published) / "probe.json")
    try:
        data = Path(published_thumbnails(pinned)).read_bytes()
        if data == thumbnails.bytes() and _sizes(before) == _sizes(record):
            return None, NO_PICTURE
        return _compared(before, record, data, thumbnails)
    except (OSError, ValueError, KeyError, TypeError):  # nothing there, or of another skykiln
        return None, NO_PICTURE


def _compared(before, record, data, thumbnails):
    import numpy as np

    from ..light.chain_change import level_change
    from ..report.probe_pictures import change_picture

    old, new = _chain(np.load(io.BytesIO(data)), before), _chain(thumbnails.array(), record)
    levels = [level_change(*pair)._asdict() for pair in zip(old, new, strict=False)]
    change = {
        "levels": levels,
        "largest": max(level["largest"] for level in levels),
        "mean": max(level["mean"] for level in levels),
        "illuminance": _illuminance(before, record),
        "moved_deg": _moved(before, record),
        "source_changed": before["source"]["digest"] != record["source"]["digest"],
    }
    return change, change_picture(old, new)


def _chain(texels, record):
    from ..light.thumbnails import restored

    return restored(texels, _sizes(record))


def _sizes(record):
    return [level["face_size"] for level in record["specular"]["levels"]]


def _illuminance(before, after):
    """On the level surface, from the sky; with its sun where that became a light of its own."""
    values = [whole_illuminance(record) for record in (before, after)]
    ratio = values[1] / values[0] if values[0] > 0 else None
    return {"before": values[0], "after": values[1], "ratio": ratio}


def whole_illuminance(record):
    """Of the level surface, from the sky in a probe's files and from the sun beside it."""
    sun = record["sun"]
    beam = sun["illuminance"] * max(sun["direction"][1], 0.0) if sun else 0.0
    return record["energy"]["horizontal_illuminance"] + beam


def _moved(before, after):
    """Degrees between the suns, or between the brightest spots where one has no sun of its own."""
    import numpy as np

    told = [record["sun"] for record in (before, after)]
    if not all(told):
        told = [record["energy"]["brightest"] for record in (before, after)]
    a, b = (np.array(each["direction"]) for each in told)
    return float(np.degrees(np.arctan2(np.linalg.norm(np.cross(a, b)), a @ b)))
