"""Numbers in words, for pages and texts."""

import math


def seconds_in_words(seconds) -> str:
    """'0.4 s', '75 s', '12 min', '2 h 05 min'."""
    if seconds < 120:
        return f"{seconds:.1f} s" if seconds < 10 else f"{seconds:.0f} s"
    minutes = round(seconds / 60)
    return f"{minutes} min" if minutes < 90 else f"{minutes // 60} h {minutes % 60:02d} min"


def percent(share, signed=False) -> str:
    """A share: '0.42 %', '+12 %'."""
    value = 100 * share
    digits = f"{value:+.3g}" if signed else f"{value:.3g}"
    if abs(value) >= 100:
        digits = f"{value:{'+' if signed else ''},.0f}"
    return f"{digits} %"


def stops(ratio) -> str:
    """A ratio of light as stops: '+0.16 EV'."""
    return f"{math.log2(ratio):+.2f} EV" if ratio > 0 else "to black"


def amount(value) -> str:
    """A quantity with four digits: '98,000', '0.01234'."""
    if value is None:
        return "-"
    size = abs(value)
    if size >= 1000:
        return f"{value:,.0f}" if size < 1e7 else f"{value:.3g}"
    return f"{value:.4g}"


def change_words(change) -> str:
    """The change of a probe in a line."""
    parts = [f"pixels {percent(change['mean'])} on average, {percent(change['largest'])} at most"]
    light = change["illuminance"]
    if light["ratio"] is not None and abs(light["ratio"] - 1) >= 5e-5:
        parts.append(f"illuminance {percent(light['ratio'] - 1, signed=True)} ({stops(light['ratio'])})")
    moved = change["moved_deg"]
    if moved is not None and moved >= 0.05:
        parts.append(f"brightest spot moved {moved:.1f} degrees")
    if not change["source_changed"]:
        parts.append("its source did not change")
    return "; ".join(parts)
