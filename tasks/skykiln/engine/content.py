"""What stages hand to each other: arrays, JSON and bytes, as files with a digest.

Arrays are .npy files that readers map into memory. What this process wrote or read lately is kept
at hand too, so that the stages of a small probe don't open each other's files.
"""

import io
import json
import os
from collections import OrderedDict
from typing import NamedTuple

from .digests import bytes_of, json_bytes

AT_HAND_BYTES = 64 * 2**20

_at_hand: OrderedDict = OrderedDict()
_held = 0  # bytes of them


def chunks_of(content) -> list:
    """The bytes of a stage's output: an array as .npy, a dict as JSON, bytes as they are."""
    if isinstance(content, dict):
        return [json_bytes(content)]
    if isinstance(content, bytes | bytearray | memoryview):
        return [content]
    return _npy_chunks(content)


class Input(NamedTuple):
    """A file that a stage reads, and the digest that its bytes have."""

    path: str
    digest: str

    def array(self):
        """The array of a .npy file; don't write to it."""
        known = _at_hand.get(_key(self))
        if known is not None:
            _at_hand.move_to_end(_key(self))
            return known
        import numpy as np

        # "c", copy on write: a read-only array would be another type to Numba, compiled anew.
        array = np.load(self.path, mmap_mode="c").view(np.ndarray)
        keep_at_hand(self, array)
        return array

    @property
    def size(self) -> int:
        """Bytes of the file."""
        return os.stat(self.path).st_size

    def json(self) -> dict:
        """The values of a JSON file."""
        return json.loads(self.bytes())

    def bytes(self) -> bytes:
        """All bytes of the file."""
        return bytes_of(self.path)


def keep_at_hand(file: Input, array):
    """Remember an array for the stages that come next, the oldest ones making room."""
    global _held
    if array.nbytes > AT_HAND_BYTES // 8:
        return
    before = _at_hand.pop(_key(file), None)
    _at_hand[_key(file)] = array
    _held += array.nbytes - (0 if before is None else before.nbytes)
    while _held > AT_HAND_BYTES:
        _held -= _at_hand.popitem(last=False)[1].nbytes


def _key(file):
    return str(file.path), file.digest


def _npy_chunks(array):
    import numpy as np

    array = np.ascontiguousarray(array)
    header = io.BytesIO()
    np.lib.format.write_array_header_1_0(header, np.lib.format.header_data_from_array_1_0(array))
    # memoryview knows no bytes of an empty array.
    return [header.getvalue(), *([memoryview(array).cast("B")] if array.size else [])]
