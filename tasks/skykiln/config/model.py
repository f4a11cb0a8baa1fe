"""What pipeline.yaml may hold, as pydantic models: their JSON Schema is what editors complete from.

A value that is not listed here is an error. Descriptions are written for the person who types the file.
"""

import re
from typing import Annotated, Any, Literal

from pydantic import AfterValidator, BeforeValidator, Field, PlainValidator, StringConstraints, WithJsonSchema
from pydantic_core import PydanticCustomError

from .section import Path, Section, own_sentence
from .source_model import FacesSource, FileSource, GlobSource

CubeAxes = Literal["negate_x", "negate_z", "direct"]
FaceSize = Literal["auto", 1, 2, 4, 8, 16, 32, 64, 128, 256, 512, 1024, 2048, 4096]
SmallFaceSize = Literal[1, 2, 4, 8, 16, 32, 64, 128, 256]

# Which pixel codings a container takes.
CODINGS = {
    "ktx2": ("rgba16f", "rgb9e5", "r11g11b10f", "bc6h"),
    "dds": ("rgba16f", "rgb9e5", "r11g11b10f", "bc6h"),
    "exr": ("half", "float"),
}

ROUGHNESS_SCHEMA = {
    "anyOf": [
        {"const": "linear"},
        {"type": "array", "items": {"type": "number", "minimum": 0, "maximum": 1}, "minItems": 1},
    ]
}

SHEEN_FROM = 0.1  # below, the sheen lobe is a ring thinner than a degree, and slow to filter
SHEEN_ROUGHNESS_SCHEMA = {
    "anyOf": [
        {"const": "linear"},
        {"type": "array", "items": {"type": "number", "minimum": SHEEN_FROM, "maximum": 1}, "minItems": 1},
    ]
}

UNITS = {
    **{"B": 1, "kB": 1000, "MB": 1000**2, "GB": 1000**3, "TB": 1000**4},
    **{"KiB": 1024, "MiB": 1024**2, "GiB": 1024**3, "TiB": 1024**4},
}
SIZE = re.compile(rf"([0-9]+(?:\.[0-9]+)?) ?({'|'.join(UNITS)})")
SIZE_SCHEMA = {
    "anyOf": [
        {"type": "integer", "minimum": 1},
        {"type": "string", "pattern": f"^{SIZE.pattern}$"},
        {"type": "null"},
    ],
    "examples": [8388608, "8 MiB", "1.5 GB"],
}


def _whole(value):
    """The value, unless it is a boolean or a float, which Python takes for equal to 0 or 1."""
    if isinstance(value, bool | float):
        raise PydanticCustomError("not_whole", "not a whole number")
    return value


def _roughness(value):
    """`linear` or a list of numbers; whether they rise is judged beside the number of levels."""
    if value == "linear":
        return value
    numbers = isinstance(value, list) and all(type(item) in (int, float) for item in value)
    if not numbers or not value:
        raise PydanticCustomError("roughness", "neither 'linear' nor a list of numbers")
    return [float(item) for item in value]


def _size(value):
    """A number of bytes, or None; from a number or a text with a unit."""
    if value is None or (type(value) is int and value > 0):
        return value
    found = SIZE.fullmatch(value) if isinstance(value, str) else None
    if found is None or float(found[1]) == 0:
        raise PydanticCustomError("size", "not a size")
    return round(float(found[1]) * UNITS[found[2]])


def _rising(limits):
    """[least, most], in this order."""
    if limits[0] > limits[1]:
        raise own_sentence(f"found {limits[0]:g}, {limits[1]:g}; allowed: [least, most]")
    return limits


LuxRange = Annotated[list[float], Field(min_length=2, max_length=2), AfterValidator(_rising)]
Roughness = Annotated[Any, PlainValidator(_roughness), WithJsonSchema(ROUGHNESS_SCHEMA)]
SheenRoughness = Annotated[Any, PlainValidator(_roughness), WithJsonSchema(SHEEN_ROUGHNESS_SCHEMA)]
Size = Annotated[Any, PlainValidator(_size), WithJsonSchema(SIZE_SCHEMA)]


class Colour(Section):
    """Colour of the baked values."""

    working: Literal["rec709", "rec2020", "acescg"] = Field(
        "rec709", description="Primaries that the light is baked in."
    )
    assume: Literal["rec709", "rec2020", "acescg", "aces2065_1", "display_p3"] = Field(
        "rec709", description="Primaries of files that don't tell their own."
    )


class Sun(Section):
    """What becomes of the sun."""

    action: Literal["keep", "separate"] = Field(
        "keep",
        description="keep: the sun stays in the sky; separate: it becomes a directional light in "
        "probe.json, and the sky is filled in where it stood.",
    )


class Specular(Section):
    """The chain of GGX-filtered mip levels."""

    levels: Annotated[int, Field(ge=1, le=13)] | Literal["full"] = Field(
        8,
        description="Number of mip levels; level 0 is the unfiltered mirror. full: down to 1 texel, "
        "for a face_size that is a number.",
    )
    roughness: Roughness = Field(
        "linear",
        description="Roughness of each level: linear (level k of n has k/(n-1)), or a list with one "
        "number per level that starts with 0 and rises to at most 1.",
    )
    tolerance: float = Field(
        0.005,
        gt=0.0001,
        lt=0.5,
        description="Largest relative error of a texel against exact quadrature over the source.",
    )


class Sheen(Section):
    """A second chain: the sky filtered by the Charlie sheen lobe of cloth, to specular.tolerance."""

    levels: Annotated[int, Field(ge=1, le=9)] = Field(
        5, description="Number of mip levels. None is a mirror: sheen of roughness 0 reflects nothing."
    )
    roughness: SheenRoughness = Field(
        "linear",
        description="Roughness of each level: linear (level k of n has (k + 1)/n), or a list with one "
        f"number per level that rises from at least {SHEEN_FROM} to at most 1.",
    )
    face_size: Annotated[SmallFaceSize, BeforeValidator(_whole)] = Field(
        64, description="Edge of a face of level 0 in texels, a power of two."
    )


class Irradiance(Section):
    """Diffuse light: a small cube of irradiance and its spherical harmonics."""

    face_size: Annotated[SmallFaceSize, BeforeValidator(_whole)] = Field(
        32, description="Edge of a face of the irradiance cube in texels."
    )
    sh_order: Annotated[Literal[2], BeforeValidator(_whole)] = Field(
        2, description="Order of the spherical harmonics in probe.json; 2 gives nine rows."
    )
    pixels: Literal["rgba16f", "rgb9e5", "r11g11b10f"] = Field(
        "rgba16f", description="Pixel coding of the irradiance cube; packs to exr use their own."
    )


class PackEntry(Section):
    """One pair of container and pixel coding that a probe is packed to."""

    container: Literal["ktx2", "dds", "exr"] = Field(
        description="ktx2 and dds: textures for renderers; exr: one part per level, for programs that "
        "compose and grade."
    )
    pixels: Literal["rgba16f", "rgb9e5", "r11g11b10f", "bc6h", "half", "float"] = Field(
        description="Pixel coding of the specular chain: half or float for exr, one of the others for "
        "ktx2 and dds. bc6h needs the extra: pip install 'skykiln[bc6h]'."
    )
    compress: Annotated[int, Field(ge=1, le=22)] | None = Field(
        None,
        description="Packs every level of a ktx2 chain with Zstandard: from 1, quick, to 22, small. "
        "The irradiance cube stays plain. null: nothing is packed.",
    )
    cube_axes: CubeAxes | None = Field(
        None, description="Overrides the cube_axes at the top of the file for this pack; null does not."
    )
    name: Annotated[str, StringConstraints(pattern=r"^[A-Za-z0-9_-]{1,64}$")] | None = Field(
        None,
        description="Takes the place of <pixels> in the file name specular.<pixels>.<container>; "
        "needed when a recipe lists the same pair twice. Letters, digits, _ and -.",
    )


class Recipe(Section):
    """A named set of parameters that sources are baked with."""

    face_size: Annotated[FaceSize, BeforeValidator(_whole)] = Field(
        "auto",
        description="Edge of a face of level 0 in texels, a power of two; "
        "auto: the largest power of two that is at most a quarter of the panorama's width.",
    )
    colour: Colour = Field(Colour(), description="Colour of the baked values.")
    sun: Sun = Field(Sun(), description="What becomes of the sun.")
    specular: Specular = Field(Specular(), description="The chain of GGX-filtered mip levels.")
    irradiance: Irradiance = Field(Irradiance(), description="Diffuse light.")
    sheen: Sheen | None = Field(
        None, description="A second chain, filtered by the sheen lobe, in a file of its own; null: none."
    )
    pack: list[PackEntry] = Field(
        [PackEntry(container="ktx2", pixels="rgba16f")],
        min_length=1,
        description="What files a probe is packed to, one entry each.",
    )


class Brdf(Section):
    """The BRDF table."""

    size: int = Field(128, ge=4, le=1024, description="Edge of the BRDF table in texels.")


class ByteGates(Section):
    """Limits of size."""

    probe_gpu: Size = Field(
        None, description="What the largest pack of a probe may take on the GPU, its irradiance counted."
    )
    night_disk: Size = Field(
        None, description="What the published files of all probes may take on disk. Holds no single probe."
    )


class ChangeGates(Section):
    """Limits of change against what stands published: the mean relative change of a probe's worst level."""

    same_source: Annotated[float, Field(ge=0, le=100)] | None = Field(
        None,
        description="How much the pixels of a probe may change although the bytes of its source did not: "
        "by another setting, or another version of skykiln. 0.001 is a tenth of a percent, 0 not at all.",
    )
    mean: Annotated[float, Field(ge=0, le=100)] | None = Field(
        None, description="How much they may change at all; 0.2 is 20 %."
    )


class BrightnessGates(Section):
    """Limits of brightness against others of the recipe."""

    stops: Annotated[float, Field(gt=0, le=32)] | None = Field(
        None,
        description="How far a probe's mean luminance may stand from the median of its recipe. "
        "Judged when the night ends; holds no single probe.",
    )


class Gates(Section):
    """Limits; a probe that crosses one is held."""

    bytes: ByteGates = Field(
        ByteGates(), description="Limits of size: a number of bytes, or a size such as 8 MiB or 1.5 GB."
    )
    audit: bool = Field(
        False,
        description="true: a probe that fails its audit is held. false: it is published, and night.json "
        "and the last lines of the bake tell of it.",
    )
    brightness: BrightnessGates = Field(
        BrightnessGates(), description="Limits of brightness against others of the recipe."
    )
    horizontal_lux: LuxRange | None = Field(
        None,
        description="[least, most] illuminance on a level surface, in lux, of probes in cd/m2, their "
        "sun counted. null: not judged.",
    )

    change: ChangeGates = Field(ChangeGates(), description="Limits of change, as shares.")

    def limits(self) -> dict:
        """The limits that are given, by their dotted keys below `gates`."""
        found = {}
        for name, limit in self.model_dump(exclude_none=True).items():
            if isinstance(limit, dict):
                found |= {f"{name}.{key}": each for key, each in limit.items()}
            elif limit is not False:
                found[name] = limit
        return found


class Limits(Section):
    """What a source may be at most, so that a damaged header takes no machine down."""

    max_pixels: Annotated[int, Field(ge=1, le=1 << 32)] | None = Field(
        None, description="Pixels of a picture; null: 134217728, 16384 x 8192."
    )


class Report(Section):
    """The pages that tell of a night."""

    nights: Annotated[int, Field(ge=1, le=1000), BeforeValidator(_whole)] = Field(
        14, description="How many nights' records are kept in report/nights."
    )


class PipelineHead(Section):
    """The pipeline file without its recipes and sources."""

    skykiln: Annotated[Literal[1], BeforeValidator(_whole)] = Field(
        description="Version of this schema: 1."
    )
    build_dir: Path = Field(
        "build", description="Folder for all that a bake leaves; relative to the pipeline file."
    )
    cube_axes: CubeAxes = Field(
        "negate_x",
        description="How a renderer samples the packed cubes: negate_x with (-x, y, z), "
        "negate_z with (x, y, -z), direct with (x, y, z) and face images mirrored.",
    )
    brdf: Brdf = Field(Brdf(), description="The BRDF table, shared by all probes.")
    gates: Gates = Field(Gates(), description="Limits; a probe that crosses one is held.")
    report: Report = Field(Report(), description="The pages that tell of a night.")
    limits: Limits = Field(Limits(), description="Limits that every source file keeps.")


class PipelineFile(PipelineHead):
    """skykiln's pipeline file: what is baked, from which sources, to which files."""

    recipes: dict[str, Recipe] = Field(
        min_length=1, description="Named sets of parameters that sources are baked with."
    )
    sources: dict[str, FileSource | FacesSource | GlobSource] = Field(
        min_length=1, description="What is baked: the name of a probe, or of a group of them, and its entry."
    )


def pipeline_schema() -> dict:
    """JSON Schema (draft 2020-12) of the pipeline file."""
    schema = PipelineFile.model_json_schema()
    return {"$schema": "https://json-schema.org/draft/2020-12/schema", **schema}
