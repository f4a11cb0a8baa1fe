"""Pictures of 8- and 16-bit whole numbers: refused by default, and decoded by the sRGB curve if allowed.

16-bit pictures are taken as sRGB too: photographs and exports for screens are, and nothing in most files says
otherwise. Who has a linear 16-bit file scales it to floats and saves those.
"""

import numpy as np

from skykiln.errors import FileError
from skykiln.formats.chromaticities import REC709


def check_allowed(name: str, what: str, allow_ldr: bool) -> None:
    """Refuse a picture of whole numbers unless the user takes it; `what` is 'an 8-bit PNG picture'."""
    if not allow_ldr:
        raise FileError(
            f"{name}: {what}: whole numbers have no range for a sun or a lamp, so that what it lights comes "
            "out dark and flat; export it as OpenEXR or Radiance .hdr, or accept that with allow_ldr: true"
        )


def warning(what: str, bits: int, pixels: np.ndarray) -> str:
    """The sentence that stays with the probe."""
    share = float((pixels >= 1).any(-1).mean())
    return (
        f"read from {what}, taken as sRGB: it has no range for a sun or a lamp; {share:.2%} of its pixels "
        f"stand at the largest {bits}-bit value, and their true light is unknown"
    )


def linear(stored: np.ndarray) -> np.ndarray:
    """Light of sRGB values, uint8 or uint16 to float32 in 0..1 (IEC 61966-2-1, 5.2)."""
    largest = np.iinfo(stored.dtype).max
    value = np.arange(largest + 1) / largest
    curve = np.where(value <= 0.04045, value / 12.92, ((value + 0.055) / 1.055) ** 2.4)
    return curve.astype(np.float32)[stored]


# sRGB's own primaries and white.
SRGB = REC709
