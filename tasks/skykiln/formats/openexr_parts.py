"""What stands in an OpenEXR file: its parts, their layers, and which of them is meant.

A layer is what stands before the last point of its channels' names: 'sky' for sky.R; the plain R, G, B
are the layer ''. A layer is a picture if it has R, G and B, or Y with or without RY and BY.
"""

from typing import NamedTuple

import OpenEXR

from skykiln.errors import FileError
from skykiln.formats.chromaticities import Chromaticities, chromaticities
from skykiln.formats.image import ReadOptions

RGB, LUMINANCE_CHROMA, LUMINANCE = "RGB", "luminance-chroma", "luminance"
_CHANNELS = {RGB: ("R", "G", "B"), LUMINANCE_CHROMA: ("Y", "RY", "BY"), LUMINANCE: ("Y",)}
_ENVMAPS = {OpenEXR.ENVMAP_LATLONG: "latlong", OpenEXR.ENVMAP_CUBE: "cube"}

Window = tuple[int, int, int, int]  # lowest and highest column and row, both inside, x first


class Part(NamedTuple):
    """What of a part's header is looked at."""

    number: int
    name: str | None
    window: Window  # the data window: of the pixels that are there
    display: Window
    sampling: dict[str, tuple[int, int]]  # channel -> each how many columns and rows it has a pixel
    storage: OpenEXR.Storage
    tile_pixels: int  # 0 for scan lines
    compression: str
    envmap: str | None
    chromaticities: Chromaticities | None
    white_luminance: float | None

    @property
    def layers(self) -> dict[str, list[str]]:
        """Layer -> the rest of its channels' names, sorted."""
        found = {}
        for channel in sorted(self.sampling):
            layer, _, rest = channel.rpartition(".")
            found.setdefault(layer, []).append(rest)
        return found


class Picture(NamedTuple):
    """One layer of one part, and what its channels are."""

    part: Part
    layer: str
    kind: str

    @property
    def channels(self) -> list[str]:
        """Names of the channels that it is made of, in the order of its kind."""
        return [f"{self.layer}.{rest}" if self.layer else rest for rest in _CHANNELS[self.kind]]


def read_part(name: str, number: int, header: dict) -> Part:
    """Raises: FileError where the header lacks what every header has."""
    try:
        channels = {c.name: (int(c.xSampling), int(c.ySampling)) for c in header["channels"]}
        colour, white = header.get("chromaticities"), header.get("whiteLuminance")
        return Part(
            number=number,
            name=header.get("name"),
            window=_window(header["dataWindow"]),
            display=_window(header["displayWindow"]),
            sampling=channels,
            storage=header["type"],
            tile_pixels=header["tiles"].xSize * header["tiles"].ySize if "tiles" in header else 0,
            compression=header["compression"].name.removesuffix("_COMPRESSION").lower(),
            envmap=_ENVMAPS.get(header.get("envmap")),
            chromaticities=None if colour is None else chromaticities(name, colour),
            white_luminance=None if white is None else float(white),
        )
    # The package hands out headers with attributes missing, or of other types, and names that are no UTF-8.
    except (KeyError, UnicodeDecodeError, TypeError, AttributeError, ValueError) as error:
        raise FileError(f"{name}: its header is damaged ({error}); export it again") from error


def _window(corners) -> Window:
    return tuple(int(x) for corner in corners for x in corner)


def choose_picture(name: str, parts: list[Part], options: ReadOptions) -> Picture:
    """The one picture that the options mean. Without a layer's name, plain R, G, B come first.

    Raises: FileError that lists what there is, if none is meant, or several are.
    """
    chosen = parts if options.part is None else [_part(name, parts, options.part)]
    pictures = [
        Picture(part, layer, kind)
        for part in chosen
        for layer, channels in part.layers.items()
        if (kind := _kind(set(channels))) and options.layer in (None, layer)
    ]
    if options.layer is None:
        pictures = [picture for picture in pictures if not picture.layer] or pictures
    if len(pictures) == 1:
        return pictures[0]
    raise FileError(f"{name}: {_why_none(pictures, chosen, options)}. It holds {_listed(chosen)}")


def _part(name: str, parts: list[Part], wanted: str | int) -> Part:
    for part in parts:
        if wanted in (part.name, part.number):
            return part
    raise FileError(f"{name}: no part {wanted!r}; name one that is there. It holds {_listed(parts)}")


def _kind(channels: set[str]) -> str | None:
    if channels >= set("RGB"):
        return RGB
    if channels >= {"Y", "RY", "BY"}:
        return LUMINANCE_CHROMA
    # Y beside X is a position's or a motion's; beside a part of R, G, B or of the chroma, a loss.
    return LUMINANCE if "Y" in channels and not channels & {"R", "G", "B", "X", "RY", "BY"} else None


def _why_none(pictures: list[Picture], chosen: list[Part], options: ReadOptions) -> str:
    if pictures and len({picture.part.number for picture in pictures}) > 1:
        return f"{len(pictures)} pictures; say which with part: (and layer:)"
    if pictures:
        return f"{len(pictures)} layers are pictures; say which with layer:"
    if options.layer is None:
        return "no picture in it, as no layer has R, G, B, or Y; export one"
    if any(options.layer in part.layers for part in chosen):
        return f"layer {options.layer!r} lacks channels: a picture has R, G, B, or Y; export them"
    return f"no layer {options.layer!r}; name one that is there"


def _listed(parts: list[Part]) -> str:
    if len(parts) == 1:
        return _listed_layers(parts[0])
    return "; ".join(_first(12, [f"part {_called(part)}: {_listed_layers(part)}" for part in parts]))


def _called(part: Part) -> str:
    return f"{part.number}" if part.name is None else f"{part.number} {part.name!r}"


def _listed_layers(part: Part) -> str:
    shown = [
        f"{f'layer {layer!r}' if layer else 'plain'} {' '.join(_first(8, channels))}"
        for layer, channels in part.layers.items()
    ]
    return ", ".join(_first(12, shown))


def _first(count: int, texts: list[str]) -> list[str]:
    return texts if len(texts) <= count else [*texts[:count], "..."]
