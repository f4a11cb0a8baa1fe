"""Numbers in words, for pages, texts and messages."""

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
    if value in (None, ""):
        return "-"
    size = abs(value)
    if size >= 1000:
        return f"{value:,.0f}" if size < 1e7 else f"{value:.3g}"
    return f"{value:.4g}"


def bytes_in_words(count: int) -> str:
    """A number of bytes: '812 bytes', '5.33 MiB'."""
    if count < 1024:
        return f"{count} bytes"
    power = min((count.bit_length() - 1) // 10, 4)
    return f"{count / 1024**power:.4g} {('KiB', 'MiB', 'GiB', 'TiB')[power - 1]}"
