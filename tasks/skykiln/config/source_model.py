"""What pipeline.yaml may say about a source: where it lies, what it shows, how bright it was."""

from typing import Annotated, Any, Literal

from pydantic import Field, PlainValidator, WithJsonSchema

from .problems import shown
from .section import Extra, Path, Section, own_sentence

Layout = Literal[
    "auto", "equirect", "equirect_upper", "cube", "cross_horizontal", "cross_vertical",
    "strip_horizontal", "strip_vertical", "angular", "mirror_ball", "fisheye",
]  # fmt: skip
SKY_ALONE = ("equirect_upper", "fisheye")  # layouts that show nothing under the horizon
CUBES_OF_ANY_AXES = ("auto", "strip_horizontal", "strip_vertical")
FACES = ("+x", "-x", "+y", "-y", "+z", "-z")

_CHANNELS_SCHEMA = {"type": "array", "items": {"type": "number"}, "minItems": 3, "maxItems": 3}
GROUND_SCHEMA = {
    "anyOf": [
        {"const": "mirror"},
        {"type": "number", "minimum": 0},
        _CHANNELS_SCHEMA,
        {
            "type": "object",
            "properties": {
                "reflectance": {
                    "description": "Of a level plain that the sky lights, from 0 to 1: one number, or three.",
                    "anyOf": [{"type": "number", "minimum": 0, "maximum": 1}, _CHANNELS_SCHEMA],
                }
            },
            "required": ["reflectance"],
            "additionalProperties": False,
        },
        {"type": "null"},
    ]
}
GROUND_ALLOWED = (
    "mirror, a radiance from 0 (a number, or three), {reflectance: a number from 0 to 1, or three}, or null"
)


def _ground(value):
    """(kind, channels) as `light.ground` takes them, or None."""
    if value is None:
        return None
    if value == "mirror":
        return ("mirror", None)
    reflecting = isinstance(value, dict) and value.keys() == {"reflectance"}
    channels = _channels(value["reflectance"] if reflecting else value)
    if channels is None or (reflecting and max(channels) > 1):
        raise own_sentence(f"found {shown(value)}; allowed: {GROUND_ALLOWED}")
    return ("reflectance" if reflecting else "colour", channels)


def _channels(value):
    """Three floats, none negative, of a number or of three; None if it is neither."""
    numbers = value if isinstance(value, list) else [value] * 3
    right = len(numbers) == 3 and all(type(number) in (int, float) for number in numbers)
    return tuple(map(float, numbers)) if right and all(0 <= number <= 1e30 for number in numbers) else None


Ground = Annotated[Any, PlainValidator(_ground), WithJsonSchema(GROUND_SCHEMA)]
Angle = Annotated[float, Field(ge=-360, le=360)]
Lux = Annotated[float, Field(gt=0, le=1e7)]
Luminance = Annotated[float, Field(gt=0, le=1e12)]


class Patch(Section):
    """A patch of the sky, or a grey card, whose luminance was measured."""

    direction: Annotated[list[float], Field(min_length=3, max_length=3)] = Field(
        description="x, y, z towards its middle, in the world of the baked probe."
    )
    size_deg: float = Field(gt=0, le=90, description="How wide it is across, as an angle.")
    cd_m2: Luminance | None = Field(None, description="Measured luminance in cd/m2.")
    reflectance: Annotated[float, Field(gt=0, le=1)] | None = Field(
        None, description="Of a matt card, with lux; 0.18 for the usual grey."
    )
    lux: Lux | None = Field(None, description="Measured illuminance on the card's own plane.")
    balance: bool = Field(False, description="true: the patch is grey, and white is balanced by it.")


class SourceSettings(Section):
    """What may be said about a source besides where it lies."""

    layout: Layout = Field(
        "auto", description="How the image covers the sphere; auto: as the file says, else by its aspect."
    )
    face_axes: Literal["auto", "openexr", "negate_x", "negate_z", "direct"] = Field(
        "auto",
        description="How the images of a strip, or of six files, lie: as OpenEXR's cube, or in the cube "
        "space of a renderer (see cube_axes). auto: what joins best along the edges, openexr or negate_x.",
    )
    ground: Ground = Field(
        None,
        description="What fills the part that the picture doesn't show: mirror, a radiance, or the "
        "reflectance of a plain that the sky lights.",
    )
    flip: bool = Field(False, description="true: the picture was saved mirrored, left for right.")
    up: Literal["y", "z"] = Field("y", description="The axis that points up in the source's own world.")
    yaw_deg: Angle = Field(0.0, description="Turn about the vertical; positive takes +z towards +x.")
    pitch_deg: Angle = Field(0.0, description="Levels a capture: positive lifts +z towards +y.")
    roll_deg: Angle = Field(
        0.0, description="Levels a capture: positive takes +y towards +x, which is left in the picture."
    )
    part: int | str | None = Field(
        None, description="Of a file with several parts or pages: the name or the number, from 0."
    )
    layer: str | None = Field(
        None, description="What stands before the channels' names: sky for sky.R, sky.G, sky.B."
    )
    allow_ldr: bool = Field(
        False, description="true: pictures of 8- and 16-bit integers are taken, without range for a sun."
    )
    exposure_ev: float = Field(
        0.0, ge=-32, le=32, description="Stops by which the source is brightened."
    )
    horizontal_lux: Lux | None = Field(
        None,
        description="Measured illuminance on a level surface in lux: the source is scaled to it, "
        "its values are then cd/m2. null: not measured.",
    )
    sun_lux: Lux | None = Field(
        None,
        description="Measured illuminance on a surface that faces the sun, of sun and sky together, in lux. "
        "null: not measured.",
    )
    patch: Patch | None = Field(None, description="A patch whose luminance was measured; null: none.")
    white_luminance: Luminance | None = Field(
        None, description="cd/m2 of the pixel (1, 1, 1) of a calibrated file; null: as the file says, if so."
    )
    max_luminance: Luminance | None = Field(
        None,
        description="Pixels are darkened to this luminance at most, in the probe's units, and the lost light "
        "is told. null: none is.",
    )
    extra: Extra = Field(
        {}, description="Copied unread into probe.json: position, influence box, whatever you need."
    )


class FileSource(SourceSettings):
    """One file: one probe, named as the entry."""

    file: Path = Field(description="The image file; relative to the pipeline file.")
    recipe: str = Field(description="Name of the recipe that bakes it.")


def _face(axis):
    return Field(alias=axis, description=f"The image file of the face {axis}.")


class FaceFiles(Section):
    """Six square image files."""

    plus_x: Path = _face("+x")
    minus_x: Path = _face("-x")
    plus_y: Path = _face("+y")
    minus_y: Path = _face("-y")
    plus_z: Path = _face("+z")
    minus_z: Path = _face("-z")

    def files(self) -> tuple:
        """The files in the order of `FACES`."""
        return tuple(getattr(self, name) for name in FaceFiles.model_fields)


class FacesSource(SourceSettings):
    """Six files, one of each face of a cube: one probe, named as the entry."""

    faces: FaceFiles = Field(description="The six image files; relative to the pipeline file.")
    recipe: str = Field(description="Name of the recipe that bakes them.")


class EachOverride(SourceSettings):
    """Settings of one file of a glob that differ from those of its entry."""

    recipe: str | None = Field(None, description="Another recipe for this file; null: the entry's.")


class GlobSource(SourceSettings):
    """Many files: one probe each, named <entry>/<path below the glob's fixed part, without suffix>."""

    files: Path = Field(
        description="Glob of image files, ** crosses folders; relative to the pipeline file. "
        "Files below build_dir are never taken."
    )
    recipe: str = Field(description="Name of the recipe that bakes them.")
    each: dict[str, EachOverride] = Field(
        {},
        description="Settings of single files by their path below the glob's fixed part, without suffix. "
        "Keys of extra are laid over the entry's.",
    )
