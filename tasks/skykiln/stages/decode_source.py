"""DecodeSource: a source file becomes a panorama of linear radiance, and facts about it."""

from pathlib import Path

from ..engine.digests import digest_file
from ..errors import FileError
from .probe_stage import ProbeStage

LARGEST_FLOAT32 = 3.4028234e38


class DecodeSource(ProbeStage):
    """The panorama (H, W, 3) float32, repaired and scaled; `source.json` says what was found.

    The two outputs have digests of their own, so that a new header over the same pixels stays here.
    """

    version = 1
    title = "panorama"

    def files(self):
        return {"pixels": self.work_file("panorama.npy"), "facts": self.work_file("source.json")}

    def pins(self):
        return {"source": self.pinned.pin}

    def settings(self):
        probe = self.probe
        return {
            "layout": probe.layout,
            "exposure_ev": probe.exposure_ev,
            "horizontal_lux": probe.horizontal_lux,
        }

    def make(self, inputs):
        from ..formats.source_files import read_source
        from ..light.repair import repair_pixels

        path = Path(self.pinned.source_path)
        image = read_source(path)
        self._check_pin(path)
        _check_plain(path, image)
        _check_layout(path, self.probe.layout, image)
        try:
            pixels, repairs = repair_pixels(image.pixels)
        except ValueError as error:
            raise FileError(f"{path}: {error}, so nothing can be repaired; export it again") from error
        scale = _scale(path, self.probe, pixels)
        height, width = pixels.shape[:2]
        facts = {
            "digest": self.pinned.pin,
            "layout": "equirect",
            "width": width,
            "height": height,
            "header": image.facts,
            "repaired": repairs._asdict(),
            "scale": scale,
        }
        return {"pixels": pixels if scale == 1 else pixels * pixels.dtype.type(scale), "facts": facts}

    def _check_pin(self, path):
        try:
            digest = digest_file(path)
        except OSError:
            digest = None
        if digest != self.pinned.pin:
            raise FileError(f"{path}: changed since the bake began; bake again")


def _check_plain(path, image):
    """Refuse what is read, but not yet converted or filled."""
    import numpy as np

    rec709 = np.array([(0.64, 0.33), (0.30, 0.60), (0.15, 0.06), (0.3127, 0.3290)])
    if image.chromaticities and not np.allclose(image.chromaticities, rec709, atol=2e-3):
        raise FileError(f"{path}: not in Rec. 709, by its chromaticities; convert it to linear Rec. 709")
    if image.uncovered is not None or image.pixels.ndim != 3:
        raise FileError(f"{path}: not a whole panorama; export one, uncropped")


def _check_layout(path, layout, image):
    height, width = image.pixels.shape[:2]
    if width % 2 or width < 4 or not height <= width <= 4 * height:
        raise FileError(
            f"{path}: {width} x {height} can't be a panorama, which is twice as wide as high, "
            "of an even width from 4 pixels; name another picture"
        )
    if layout != "auto":
        return
    if image.facts.get("envmap") == "cube":
        raise FileError(f"{path}: holds cube faces; a lat-long panorama is needed")
    if width != 2 * height:
        raise FileError(
            f"{path}: {width} x {height} is not twice as wide as high, as a panorama is; "
            "if it is one, say layout: equirect"
        )


def _scale(path, probe, pixels):
    """The factor from the file's values to radiance: of the exposure, or to the measured illuminance."""
    from ..light.photometry import horizontal_illuminance

    scale = 2.0**probe.exposure_ev
    if probe.horizontal_lux is not None:
        found = horizontal_illuminance(pixels)
        if not found > 0:
            raise FileError(
                f"{path}: no light from above, so horizontal_lux can't scale it; remove horizontal_lux"
            )
        scale = float(probe.horizontal_lux / found)
    if float(pixels.max()) * scale > LARGEST_FLOAT32:
        raise FileError(f"{path}: scaled by {scale:.4g} its brightest pixel overflows; lower exposure_ev")
    return scale
