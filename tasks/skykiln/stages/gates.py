"""The gates: what a limit of the pipeline file says about a probe, or about a night.

A gate goes by the dotted key of its limit below `gates`. Its function takes a record and the limit, and
gives a sentence where the limit is crossed. A probe whose record crosses one is held: `JudgeProbe`
tells so, and `PublishProbe` waits. Gates of the night are judged when it ends, on the probes that it was
asked for, and hold nothing.
"""

import math
import statistics

from ..quantities import bytes_in_words, percent
from .change import whole_illuminance

FEWEST_TO_COMPARE = 3  # of two, none can be told to be the odd one


def heavy_on_the_gpu(record, limit):
    """`gates.bytes.probe_gpu`: what a renderer takes for the largest pack of a probe."""
    return _over("on the GPU", record["bytes"]["gpu"], limit)


def heavy_on_disk(record, limit):
    """`gates.bytes.night_disk`: the published files of all probes that the night was asked for."""
    return _over("on disk", record["bytes"]["disk"], limit)


def failed_audit(record, limit):
    """`gates.audit`: an audit that calls something wrong."""
    return record["audit"]["why"] or None


def changed_by_itself(record, limit):
    """`gates.change.same_source`: the pixels changed, and the source did not."""
    change = record["change"]
    if change is None or change["source_changed"] or change["mean"] <= limit:
        return None
    return f"the source did not change, the pixels did by {percent(change['mean'])}, {_limit(limit)}"


def changed_much(record, limit):
    """`gates.change.mean`: the pixels changed by more than is to be published unseen."""
    change = record["change"]
    if change is None or change["mean"] <= limit:
        return None
    return f"the pixels changed by {percent(change['mean'])}, {_limit(limit)}"


def out_of_range(record, limit):
    """`gates.horizontal_lux`: the illuminance of a level surface, sky and sun, of a probe in cd/m2."""
    if record["units"] != "cd/m2":
        return None
    found, (least, most) = whole_illuminance(record), limit
    if least <= found <= most:
        return None
    return f"{found:.5g} lux on a level surface, the limits are {least:g} to {most:g}"


def unlike_its_recipe(record, limit):
    """`gates.brightness.stops`: mean luminance against the median of a recipe's probes of the same units."""
    groups = {}
    for probe in record["probes"]:
        light = probe["light"]
        if light:
            beam = light["sun"]["illuminance"] if light["sun"] else 0.0
            found = groups.setdefault((probe["recipe"], light["units"]), {})
            found[probe["name"]] = light["mean_luminance"] + beam / (4 * math.pi)
    told = [each for (recipe, _), found in groups.items() for each in _far_from_median(recipe, found, limit)]
    return "; ".join(told) or None


def _far_from_median(recipe, luminances, limit):
    """Sentences on the probes that stand further from the median than a limit in stops."""
    median = statistics.median(luminances.values())
    if len(luminances) < FEWEST_TO_COMPARE or not median > 0:
        return
    for name, found in luminances.items():
        stops = math.log2(found / median) if found > 0 else -math.inf
        if abs(stops) > limit:
            where = f"{abs(stops):.3g} stops {'above' if stops > 0 else 'below'}"
            told = f"{name} stands {where} the median of recipe '{recipe}', {median:.4g}"
            yield f"{told}; the limit is {limit:g}"


# function(probe.json's values and, as `change`, how they differ from what is published, limit)
PROBE_GATES = {
    "bytes.probe_gpu": heavy_on_the_gpu,
    "audit": failed_audit,
    "horizontal_lux": out_of_range,
    "change.same_source": changed_by_itself,
    "change.mean": changed_much,
}
# function(night.json's values, limit)
NIGHT_GATES = {"bytes.night_disk": heavy_on_disk, "brightness.stops": unlike_its_recipe}


def broken_gates(gates, record, limits) -> list:
    """The gates that a record breaks, each as {"gate": its key, "why": a sentence}.

    Parameters: gates : PROBE_GATES or NIGHT_GATES; limits : dotted key -> limit
    """
    asked = ((key, limit) for key, limit in limits.items() if key in gates)
    told = ((key, gates[key](record, limit)) for key, limit in asked)
    return [{"gate": key, "why": why} for key, why in told if why]


def _limit(share):
    return f"the limit is {percent(share)}"


def _over(where, found, limit):
    if found <= limit:
        return None
    words = bytes_in_words(found), bytes_in_words(limit)
    if words[0] == words[1]:
        words = f"{found} bytes", f"{limit} bytes"
    return f"{words[0]} {where}, the limit is {words[1]}"
