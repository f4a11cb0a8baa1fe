"""skykiln bakes HDR skies and light probes into what a real-time renderer loads for image-based lighting.

For a user's own Luigi pipeline: `skykiln.BakeAll(pipeline=...)`, `skykiln.BakeProbe(pipeline=..., name=...)`.
"""

import sys


def __getattr__(name):
    if name in ("BakeAll", "BakeProbe"):
        from .stages import roots

        return getattr(roots, name)
    raise AttributeError(f"module 'skykiln' has no attribute {name!r}")


# Luigi's command line finds tasks by name in its register, so a process that has loaded Luigi gets
# them registered here and now. The skykiln command has not, and says --help without it.
if "luigi" in sys.modules:
    from .stages.roots import BakeAll, BakeProbe  # noqa: F401
