"""Probe and Pack: everything that a bake needs to know about one probe, as plain frozen values.

They travel to other processes as Luigi parameters, in canonical JSON: equal probes, equal text.
"""

import dataclasses
import json


def canonical_json(value) -> str:
    """The one JSON text of a value: keys sorted, no blanks, numbers in their shortest form."""
    return json.dumps(
        value, sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False
    )


@dataclasses.dataclass(frozen=True)
class Pack:
    """One entry of a recipe's `pack` list; `name` is the specular file's.

    Packs may share an irradiance file: then they agree on all that decides it.
    """

    name: str
    container: str
    pixels: str
    cube_axes: str
    compress: int  # 0: not
    irradiance: str  # the irradiance file's name
    irradiance_pixels: str
    sheen: str  # the sheen file's name, where a probe has that chain


@dataclasses.dataclass(frozen=True)
class Patch:
    """A patch of the sky whose luminance was measured: `cd_m2`, or a card's reflectance and `lux`."""

    direction: tuple[float, float, float]
    size_deg: float
    cd_m2: float | None
    reflectance: float | None
    lux: float | None
    balance: bool


@dataclasses.dataclass(frozen=True)
class Probe:
    """One source and all that is asked of it."""

    name: str
    file: str  # with forward slashes, relative to the pipeline's folder (or absolute as the user wrote it)
    faces: tuple[str, ...]  # of a source of six files all of them, `file` being the first; else empty
    layout: str
    face_axes: str
    ground: tuple | None  # kind, channels
    flip: bool
    up: str
    yaw_deg: float
    pitch_deg: float
    roll_deg: float
    part: str | int | None
    layer: str | None
    allow_ldr: bool
    exposure_ev: float
    horizontal_lux: float | None
    sun_lux: float | None
    patch: Patch | None
    white_luminance: float | None
    max_luminance: float | None
    extra: str  # canonical JSON of a mapping
    recipe: str
    working: str
    assumed: str  # primaries of a file that doesn't tell its own
    sun_action: str
    face_size: int  # 0: auto
    roughness: tuple[float, ...]  # one per level
    tolerance: float
    irradiance_face_size: int
    irradiance_sh_order: int
    packs: tuple[Pack, ...]
    sheen_face_size: int = 0
    sheen_roughness: tuple[float, ...] = ()  # one per level; empty: no sheen chain

    @property
    def files(self) -> tuple[str, ...]:
        """All files of the source."""
        return self.faces or (self.file,)

    def to_json(self) -> str:
        """Canonical JSON of the probe."""
        packs, patch = [vars(pack) for pack in self.packs], self.patch and vars(self.patch)
        return canonical_json({**vars(self), "packs": packs, "patch": patch})

    @classmethod
    def from_json(cls, text: str) -> "Probe":
        """The probe that `to_json` wrote."""
        fields = json.loads(text)
        for name in ("faces", "roughness", "sheen_roughness"):
            fields[name] = tuple(fields[name])
        if fields["ground"]:
            kind, channels = fields["ground"]
            fields["ground"] = kind, channels and tuple(channels)
        if fields["patch"]:
            patch = fields["patch"]
            fields["patch"] = Patch(**{**patch, "direction": tuple(patch["direction"])})
        fields["packs"] = tuple(Pack(**pack) for pack in fields["packs"])
        return cls(**fields)
