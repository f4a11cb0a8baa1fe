"""The gates: what a limit of the pipeline file says about a probe, or about a night.

A gate goes by the dotted key of its limit below `gates`. Its function takes a record and the limit, and
gives a sentence where the limit is crossed. A probe whose record crosses one is held: `JudgeProbe`
tells so, and `PublishProbe` waits. Gates of the night are judged when it ends, on the probes that it was
asked for, and hold nothing.
"""

from ..engine.wording import bytes_in_words


def heavy_on_the_gpu(record, limit):
    """`gates.bytes.probe_gpu`: what a renderer takes for the largest pack of a probe."""
    return _over("on the GPU", record["bytes"]["gpu"], limit)


def heavy_on_disk(record, limit):
    """`gates.bytes.night_disk`: the published files of all probes that the night was asked for."""
    return _over("on disk", record["bytes"]["disk"], limit)


def failed_audit(record, limit):
    """`gates.audit`: an audit that calls something wrong."""
    return record["audit"]["why"] or None


# function(probe.json's values, limit)
PROBE_GATES = {"bytes.probe_gpu": heavy_on_the_gpu, "audit": failed_audit}
NIGHT_GATES = {"bytes.night_disk": heavy_on_disk}  # function(night.json's values, limit)


def broken_gates(gates, record, limits) -> list:
    """The gates that a record breaks, each as {"gate": its key, "why": a sentence}.

    Parameters: gates : PROBE_GATES or NIGHT_GATES; limits : dotted key -> limit
    """
    asked = ((key, limit) for key, limit in limits.items() if key in gates)
    told = ((key, gates[key](record, limit)) for key, limit in asked)
    return [{"gate": key, "why": why} for key, why in told if why]


def _over(where, found, limit):
    if found <= limit:
        return None
    words = bytes_in_words(found), bytes_in_words(limit)
    if words[0] == words[1]:
        words = f"{found} bytes", f"{limit} bytes"
    return f"{words[0]} {where}, the limit is {words[1]}"
