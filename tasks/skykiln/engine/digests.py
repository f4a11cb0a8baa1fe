"""Digests of bytes: SHA-256 in hexadecimal, of what is about to be written or of a file that stands."""

import hashlib
import json


def digest_chunks(chunks) -> str:
    """Digest of the bytes that the chunks make when they stand one behind the other."""
    digest = hashlib.sha256()
    for chunk in chunks:
        digest.update(chunk)
    return digest.hexdigest()


def digest_file(path) -> str:
    """Digest of a file's bytes. Raises OSError."""
    with open(path, "rb", buffering=0) as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def bytes_of(path) -> bytes:
    """All bytes of a file. Raises OSError."""
    with open(path, "rb", buffering=0) as file:
        return file.read()


def json_bytes(value) -> bytes:
    """JSON to be read by people and programs: one text for equal values, keys in the order given."""
    return (json.dumps(value, indent=1, ensure_ascii=False, allow_nan=False) + "\n").encode()


def read_json(path) -> dict:
    """The values of a JSON file; none where there is no file, or none that can be understood."""
    try:
        values = json.loads(bytes_of(path))
    except (OSError, ValueError):
        return {}
    return values if isinstance(values, dict) else {}
