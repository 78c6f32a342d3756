"""What the files of a run hold, and whether it is what an earlier run saw."""

import hashlib

from morphotone.errors import ReadingError
from morphotone.night.outcome import Item
from morphotone.reading.swc import read_bytes


def content_of(item: Item) -> bytes | ReadingError:
    """Return a file's bytes, or the error that says why they cannot be had."""
    try:
        return read_bytes(item.path, name=item.name)
    except ReadingError as error:
        return error


def is_known(content: bytes | ReadingError, sha256: str | None) -> bool:
    """Tell whether bytes have the hash of those whose outcome the ledger holds."""
    return sha256 is not None and isinstance(content, bytes) and hashlib.sha256(content).hexdigest() == sha256
