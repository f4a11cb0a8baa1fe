"""An audit as a table for people."""

HEAD = ("map", "texels", "mean", "z", "worst", "z", "used", "channel", "towards")


def audit_lines(name, what, record):
    """The verdict, a line for each map, and one for each file that was held against another.

    Parameters: what : which files were read; record : `audit` of probe.json
    """
    verdict = "passed" if record["passed"] else f"FAILED: {record['why']}"
    yield f"{name}, {what}: {verdict}"
    yield from _table([HEAD, *map(_row, record["maps"])])
    yield (
        f"{_percent(record['share_passed'])} of {record['texels']:,} texels within tolerance, rounding and "
        f"{record['limit']:.2f} standard errors; {record['samples']:,} samples"
    )
    for entry in record["files"]:
        if entry["against"] != "the source":
            share = _percent(entry["share_passed"])
            yield f"{entry['file']}: {share} of all texels are those of {entry['against']}, within rounding"


def _row(row):
    worst = row["worst"]
    return (
        row["map"],
        f"{row['texels']:,}",
        f"{100 * row['deviation']:+.3f} %",
        f"{row['z']:+.1f}",
        f"{100 * worst['deviation']:+.2f} %",
        f"{worst['z']:+.1f}",
        f"{max(row['used'], worst['used']):.2f}",
        worst["channel"],
        "({:+.2f}, {:+.2f}, {:+.2f})".format(*worst["direction"]),
    )


def _percent(share):
    """Rounded down, so that 100 % means all."""
    return f"{int(share * 10000) / 100:g} %"


def _table(rows):
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    for name, *cells in rows:
        cells = (cell.rjust(width) for cell, width in zip(cells, widths[1:], strict=True))
        yield "  ".join([name.ljust(widths[0]), *cells])
