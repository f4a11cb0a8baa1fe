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


@dataclasses.dataclass(frozen=True)
class Probe:
    """One source and all that is asked of it."""

    name: str
    file: str  # with forward slashes, relative to the pipeline's folder (or absolute as the user wrote it)
    layout: str
    yaw_deg: float
    exposure_ev: float
    horizontal_lux: float | None
    extra: str  # canonical JSON of a mapping
    recipe: str
    working: str
    sun_action: str
    face_size: int  # 0: auto
    roughness: tuple[float, ...]  # one per level
    tolerance: float
    irradiance_face_size: int
    irradiance_sh_order: int
    packs: tuple[Pack, ...]

    def to_json(self) -> str:
        """Canonical JSON of the probe."""
        return canonical_json({**vars(self), "packs": [vars(pack) for pack in self.packs]})

    @classmethod
    def from_json(cls, text: str) -> "Probe":
        """The probe that `to_json` wrote."""
        fields = json.loads(text)
        fields["roughness"] = tuple(fields["roughness"])
        fields["packs"] = tuple(Pack(**pack) for pack in fields["packs"])
        return cls(**fields)
