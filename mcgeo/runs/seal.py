"""The first 512 bytes of our HDF5 files: who wrote it, and a digest over everything, so that no damage is read as data.

HDF5 leaves room in front of its own bytes for a user block, which all its readers pass over. The block holds one line,

    FORMAT mcgeo VERSION sha256 DIGEST

and zeros; the digest is that of the line without it and of all bytes after the block. Format and version are thus
known before a byte of HDF5 is touched, and a file that was cut off or of which one bit changed is never opened.
"""

from __future__ import annotations

import hashlib
import os
import re
from typing import BinaryIO

import mcgeo
from mcgeo.errors import StorageError

BLOCK_SIZE = 512

_LINE = re.compile(rb"(mcgeo-[a-z]{1,20}/[0-9]{1,9}) mcgeo ([!-~]{1,60}) sha256 ([0-9a-f]{64})\n\0*")
_HDF5 = b"\x89HDF\r\n\x1a\n"
_CHUNK = 1 << 20


def seal(contents: memoryview, file_format: str) -> None:
    """Write the first block of a file whose other bytes are complete."""
    head = _head(file_format, mcgeo.__version__)
    digest = hashlib.sha256(head)
    digest.update(contents[BLOCK_SIZE:])
    contents[:BLOCK_SIZE] = (head + digest.hexdigest().encode("ascii") + b"\n").ljust(BLOCK_SIZE, b"\0")


def check_seal(file: BinaryIO, file_format: str, name: str, largest: int) -> None:
    """Refuse a file that is not ours, of another format, larger than any can be, or not as it was written.

    Raises
    ------
    StorageError
        In one sentence that begins with ``name``.
    """
    block = file.read(BLOCK_SIZE)
    line = _LINE.fullmatch(block)
    if line is None or len(block) != BLOCK_SIZE:
        kind = "an HDF5 file that mcgeo did not write" if block.startswith(_HDF5) else "damaged or not a result file"
        raise StorageError(f"{name}: {kind}; a result file of mcgeo begins with its format and a checksum")
    found, version, stated = (part.decode("ascii") for part in line.groups())
    if found != file_format:
        raise StorageError(
            f"{name}: a file of another format, {found}, written by mcgeo {version}; this is mcgeo "
            f"{mcgeo.__version__}, which reads {file_format}: use the version that wrote it, or sample again into "
            "another folder with --out"
        )
    if os.fstat(file.fileno()).st_size > largest:
        raise StorageError(f"{name}: larger than {largest // 10**9} GB, which no result file is")
    digest = hashlib.sha256(_head(found, version))
    while chunk := file.read(_CHUNK):
        digest.update(chunk)
    if digest.hexdigest() != stated:
        raise StorageError(f"{name}: damaged: a result file that was cut off or changed after mcgeo wrote it")


def _head(file_format: str, version: str) -> bytes:
    return f"{file_format} mcgeo {version} sha256 ".encode("ascii")
