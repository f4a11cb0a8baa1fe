"""WriteReport: the pages of a night, made from its record when it ends.

Pictures are stages; pages are not, because they tell of a night, which is no content. They are written
when a stage ran, or when what they say of failed and held probes is no longer so.
"""

from pathlib import Path

from ..engine.atomic import remove, write_atomically
from ..engine.digests import digest_chunks, json_bytes, read_json
from .draw_probe import is_sky
from .night_entries import standing_entry

_WELL = ("rebuilt", "unchanged")


def report_folder(pipeline) -> Path:
    """Where the pages of a pipeline lie."""
    return pipeline.build_dir / "report"


def write_report(record, pipeline, targets, wanted: bool = False):
    """Bring the pages up to date with a night.

    Parameters: record : values of night.json; targets : all probes of the pipeline, as stages
                wanted : whether to write them whatever they say already
    """
    folder, standings = report_folder(pipeline), pipeline.build_dir / "work" / "report.json"
    standing = {"standing": digest_chunks([json_bytes(_standing(record, targets))])}
    current = (folder / "index.html").is_file() and read_json(standings) == standing
    if current and not record["stages_run"] and not wanted:
        return
    nights = folder / "nights"
    before = read_json(_last_night(nights, record) or Path())
    _write_pages(folder, record, before or None, targets)
    _keep(nights, record, pipeline.report_nights)
    write_atomically(standings, [json_bytes(standing)], synced=False)


def _standing(record, targets):
    """What pages say that may change without a stage."""
    told = ("name", "failure", "gates", "accepted")
    return [
        [target.owner for target in targets],
        [{key: entry[key] for key in told} | {"well": entry["state"] in _WELL} for entry in record["probes"]],
        record["gates"],
    ]


def _write_pages(folder, record, before, targets):
    from ..report.pages import STATIC, index_page, static_file

    entries = {entry["name"]: entry for entry in record["probes"]}
    earlier = before["probes"] if before else ()
    troubled = {entry["name"] for entry in earlier if entry["state"] not in _WELL}
    paged = set()
    for target in targets:
        entry = entries.get(target.owner)
        page = Path(target.pinned.pictures) / "index.html"
        told = entry and (entry["state"] != "unchanged" or entry["name"] in troubled)
        if told or (is_sky(target.pinned) and not page.exists()):
            _write_page(page, record, entry or standing_entry(target), target)
        if page.exists():
            paged.add(target.owner)
    others = [standing_entry(target) for target in targets if target.owner not in entries]
    pictured = {target.owner for target in targets if (Path(target.pinned.pictures) / "small.png").exists()}
    _remove_pages_but(folder / "probes", paged)
    for name in STATIC:
        _write(folder / name, static_file(name))
    _write(folder / "index.html", index_page(record, before, others, pictured, paged))


def _remove_pages_but(folder, names):
    """Remove the pages of probes that are no longer asked for; their pictures are prune's."""
    for page in folder.rglob("index.html"):
        if str(page.parent.relative_to(folder)) not in names:
            remove(page)


def _write_page(page, record, entry, target):
    from ..report.pages import probe_page

    pinned = target.pinned
    held, published = Path(pinned.work) / "record.json", Path(pinned.published) / "probe.json"
    looks = read_json(Path(pinned.work) / "looks.json")
    probe = read_json(held if entry["state"] == "held" else published) if looks else {}
    _write(page, probe_page(record, entry, probe, looks))


def _last_night(nights, record) -> Path | None:
    """The newest manifest of an earlier night."""
    own = _manifest_name(record)
    earlier = sorted(path for path in nights.glob("*.json") if path.name < own)
    return earlier[-1] if earlier else None


def _keep(nights, record, count):
    """Keep the manifest of this night, and of so many in all."""
    _write(nights / _manifest_name(record), json_bytes(record))
    for path in sorted(nights.glob("*.json"))[:-count]:
        remove(path)


def _manifest_name(record):
    return f"{record['started'].replace(':', '').replace('+0000', 'Z')}.json"


def _write(path, data):
    if not path.exists() or path.read_bytes() != data:
        write_atomically(path, [data], synced=False)
