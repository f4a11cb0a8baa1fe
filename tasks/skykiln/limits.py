"""What a source may be at most, so that a damaged or a false file takes neither the memory nor the night."""

# 16384 x 8192: four times the pixels of the largest panoramas in use, and 1.6 GB once decoded.
MAX_PIXELS = 1 << 27

# Four layers of float RGBA, nothing packed; and what stands beside the pixels.
PIXEL_BYTES = 64
OTHER_BYTES = 1 << 20


def largest_file(max_pixels: int) -> int:
    """The most bytes that a file takes which holds a picture of so many pixels."""
    return PIXEL_BYTES * max_pixels + OTHER_BYTES
