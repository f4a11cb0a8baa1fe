"""What a night asks a person to look at, from the values of night.json: the worst first.

The page and the text tell the same findings.
"""

from typing import NamedTuple


class Finding(NamedTuple):
    """One kind of trouble. `urgent`: something is not published, or wrong; else worth a look.

    cases : pairs of a probe's name (empty: the night itself) and a sentence
    """

    title: str
    advice: str
    urgent: bool
    cases: list


def findings(record) -> list:
    """The findings of a night, empty ones left out."""
    probes = record["probes"]
    found = [
        Finding(
            "Failed",
            "Nothing new was published of these; what an earlier night published stays.",
            True,
            [(p["name"], _cause(p["failure"])) for p in probes if p["failure"]],
        ),
        Finding(
            "Held by a gate",
            "Look at the change; skykiln bake --accept NAME publishes it.",
            True,
            _broken(p for p in probes if p["state"] == "held"),
        ),
        Finding(
            "Limits of the night",
            "They hold no probe.",
            True,
            _broken([{"name": "", "gates": record["gates"]}]),
        ),
        Finding(
            "Audit out of tolerance",
            "The packed files differ from an unbiased estimate of the source by more than chance.",
            True,
            [(p["name"], p["audit"]["why"]) for p in probes if p["audit"] and not p["audit"]["passed"]],
        ),
        Finding(
            "Published although a gate is broken",
            "Accepted as they are, until they change.",
            False,
            _broken(p for p in probes if p["accepted"]),
        ),
        Finding(
            "Warnings about the source",
            "It was baked as it is; whoever uses the probe should know.",
            False,
            [(p["name"], text) for p in probes for text in (p["light"] or {}).get("warnings", ())],
        ),
        Finding(
            "Light lost",
            "Values did not fit the coding even after storage_ev.",
            False,
            list(_cases(probes, _lost)),
        ),
        Finding(
            "Pixels repaired",
            "They were no light, and took their neighbours' values; export the source again.",
            False,
            list(_cases(probes, _repaired)),
        ),
        Finding(
            "Harmonics below zero",
            "Order 2 rings opposite a strong light; probe.json has a windowed set beside it.",
            False,
            list(_cases(probes, _negative)),
        ),
    ]
    return [finding for finding in found if finding.cases]


def _broken(probes):
    return [(probe["name"], f"{gate['gate']}: {gate['why']}") for probe in probes for gate in probe["gates"]]


def _cause(failure):
    told = failure["cause"]
    return told if told.startswith(failure["file"]) else f"{failure['file']}, {failure['stage']}: {told}"


def _cases(probes, sentence):
    told = ((probe["name"], sentence(probe["light"] or {})) for probe in probes)
    return ((name, text) for name, text in told if text)


def _lost(light):
    share = light.get("lost_to_clamping", 0)
    return f"{100 * share:.2g} % of the flux" if share > 0 else None


def _repaired(light):
    count = light.get("repaired", 0)
    return f"{count} pixel{'s' if count > 1 else ''}" if count else None


def _negative(light):
    smallest = light.get("sh_smallest", 0)
    return f"down to {smallest:.4g}" if smallest < 0 else None
