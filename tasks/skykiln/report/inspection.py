"""What a packed file holds, for people: its header, its levels in numbers, samples, broken rules."""

import json
from pathlib import Path

import numpy as np

from skykiln.errors import FileError
from skykiln.formats.texture_files import broken_rules, file_bytes, header_fields, read_texture
from skykiln.light.cube_axes import CUBE_AXES
from skykiln.light.directions import cube_texel_solid_angles
from skykiln.light.sample_cube import sample_cube
from skykiln.report.pictures import file_picture

ABOUT_KEY = "skykiln"  # of the metadata: what skykiln's own files tell about themselves, as JSON
_COLUMNS = ("level", "size", "roughness", "min", "mean", "max")
_ENERGY = ("energy r", "g", "b")


class Inspection:
    """A packed file, read.

    Raises: FileError where it can't be read, with the first rule that it breaks
    """

    def __init__(self, path: Path):
        self.path = path
        self.data = file_bytes(path)
        self.texture = read_texture(self.data, str(path))
        self.is_cube = self.texture.levels[0].shape[0] == 6

    def lines(self):
        """Header, metadata, and a line for each level."""
        yield f"{self.path}: {self._summary()}"
        header = header_fields(self.data, str(self.path))
        if header:
            yield ", ".join(f"{name} {_shown(value)}" for name, value in header.items())
        for key, value in self.texture.metadata.items():
            yield f"{key}: {value if isinstance(value, str) else f'{len(value)} bytes'}"
        yield from _table([_COLUMNS + (_ENERGY if self.is_cube else ()), *self._rows()])
        stops = self._about().get("storage_ev")
        if stops:
            yield f"as stored; radiance is 2^{stops} times that"

    def samples(self, direction, level) -> str:
        """What a renderer's sampler gives for a direction of cube space, as text.

        Parameters: direction : three numbers, not all 0; level : level of detail, fractional or not
        """
        if not self.is_cube:
            raise FileError(f"{self.path}: a table has no directions; inspect it without --at")
        value = sample_cube(self.texture.levels, np.array([direction]), level)[0]
        return " ".join(f"{channel:.6g}" for channel in value)

    def draw(self, picture: Path):
        """Write all levels as a PNG."""
        from PIL import Image

        try:
            Image.fromarray(file_picture(self.texture.levels)).save(picture, format="PNG", optimize=True)
        except OSError as error:
            raise FileError(f"{picture}: can't be written: {error.strerror}; name another place") from error

    def _summary(self):
        texture = self.texture
        _, height, width, _ = texture.levels[0].shape
        kind = "cube map of 6 x" if self.is_cube else "table of"
        count = len(texture.levels)
        return (
            f"{texture.container}, {texture.pixels}, {kind} {width} x {height}, "
            f"{count} level{'s' if count > 1 else ''}, {len(self.data)} bytes, {texture.gpu_bytes} on the GPU"
        )

    def _about(self):
        about = _own_values(self.texture.metadata)
        return about if isinstance(about, dict) else {}

    def _rows(self):
        roughness = self._about().get("roughness")
        known = _rises(roughness, len(self.texture.levels))
        for number, level in enumerate(self.texture.levels):
            rough = f"{roughness[number]:.4g}" if known else "-"
            _, height, width, _ = level.shape
            values = level.min(), level.mean(dtype=np.float64), level.max()
            energy = _energy(level) if self.is_cube else ()
            yield (str(number), f"{width} x {height}", rough, *(f"{v:.5g}" for v in (*values, *energy)))


def broken_file_rules(path: Path) -> list:
    """Every rule that a file breaks, in words.

    Raises: FileError where it can't be read at all, or is no packed file
    """
    data = file_bytes(path)
    broken = list(broken_rules(data, str(path)))
    return broken or list(_broken_own_rules(read_texture(data, str(path))))


def _energy(level):
    """Integral over the sphere, per channel: value times sr."""
    return (level * cube_texel_solid_angles(level.shape[1])[None, :, :, None]).sum((0, 1, 2))


def _own_values(metadata):
    """The values of skykiln's own key; None where it isn't JSON, {} where it is missing."""
    try:
        return json.loads(metadata.get(ABOUT_KEY, "{}"))
    except ValueError:
        return None


def _broken_own_rules(texture):
    """Rules of skykiln's own key; a file without it is not ours, and may be sound."""
    about = _own_values(texture.metadata)
    if not isinstance(about, dict):
        yield f"key {ABOUT_KEY}: not a JSON object"
        return
    if not about:
        return
    if about.get("cube_axes") not in CUBE_AXES:
        yield f"key {ABOUT_KEY}: cube_axes is {about.get('cube_axes')!r}, none of {', '.join(CUBE_AXES)}"
    stops = about.get("storage_ev")
    if type(stops) is not int or stops < 0:
        yield f"key {ABOUT_KEY}: storage_ev is {stops!r}, no whole number from 0"
    content, roughness = about.get("content"), about.get("roughness")
    if content == "specular" and not (_rises(roughness, len(texture.levels)) and roughness[0] == 0):
        yield f"key {ABOUT_KEY}: roughness is no list that rises from 0 to at most 1, one per level"
    if content == "sheen" and not (_rises(roughness, len(texture.levels)) and roughness[0] > 0):
        yield f"key {ABOUT_KEY}: roughness is no list that rises from above 0 to at most 1, one per level"


def _rises(numbers, count):
    if not isinstance(numbers, list) or len(numbers) != count:
        return False
    if not all(type(number) in (int, float) for number in numbers):
        return False
    return numbers[-1] <= 1 and bool((np.diff(numbers) > 0).all())


def _table(rows):
    """Lines of right-aligned columns."""
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    for row in rows:
        yield "  ".join(cell.rjust(width) for cell, width in zip(row, widths, strict=True))


def _shown(value):
    return value.decode("ascii", "replace") if isinstance(value, bytes) else value
