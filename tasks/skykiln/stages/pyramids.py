"""The node pyramid of the probe at work: built once, remembered for its levels and its irradiance."""

import functools

from ..engine.content import Input


@functools.lru_cache(maxsize=1)
def pyramid_of(faces: Input):
    """Pyramid of a faces file; the digest in `faces` tells one content from another."""
    from ..light.pyramid import build_pyramid

    return build_pyramid(faces.array())
