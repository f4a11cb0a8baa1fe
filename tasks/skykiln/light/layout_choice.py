"""Which layout a picture has, and whether it can have the one it is said to have."""

from skykiln.light.layouts import LAYOUTS, STRIPS, cut_faces, fitting_layouts, likely_convention

_NARROWEST = 4  # pixels across


def likely_layout(width, height, envmap=None):
    """The layout of a picture that nobody named.

    Parameters: envmap : 'latlong' or 'cube', as OpenEXR's attribute says, or None
    Raises:     ValueError listing the layouts that it may have
    """
    if envmap is not None:
        return {"latlong": "equirect", "cube": "cube"}[envmap]
    # What tells an OpenEXR cube from any other strip is how its images join.
    fitting = [name for name in fitting_layouts(width, height) if name != "cube" and width >= _NARROWEST]
    if len(fitting) == 1:
        return fitting[0]
    if fitting:
        raise ValueError(f"{width} x {height} may be {', '.join(fitting)}; say which with layout:")
    raise ValueError(
        f"{width} x {height} is not twice as wide as high, as a panorama is, nor has it the aspect of "
        "another layout; if it is a panorama, say layout: equirect"
    )


def check_fit(width, height, layout):
    """Raises ValueError when a picture of this size can't have the layout."""
    if layout == "equirect":
        if width % 2 or width < _NARROWEST or not height <= width <= 4 * height:
            raise ValueError(
                f"{width} x {height} can't be a panorama, which is twice as wide as high, "
                f"of an even width from {_NARROWEST} pixels; name another picture or layout"
            )
    elif layout not in fitting_layouts(width, height) or width < _NARROWEST:
        across, down = LAYOUTS[layout].aspect
        aspect = f"{layout}, which is {across} x {down} squares"
        raise ValueError(f"{width} x {height} can't be of layout {aspect}; name another layout")


def face_convention(picture, layout, asked):
    """The convention of a strip's images; None for layouts whose images lie in one way alone.

    Parameters: asked : a name of `FACE_CONVENTIONS`, or 'auto': that under which the images join best
    """
    if layout not in STRIPS:
        return None
    return likely_convention(cut_faces(picture, STRIPS[layout])) if asked == "auto" else asked
