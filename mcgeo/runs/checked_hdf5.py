"""Reading HDF5 of unknown origin: nothing is followed, converted or allocated before it is known to be what is wanted.

Of an HDF5 file only hard links, contiguous datasets without filters, and scalar attributes of fixed size are read;
shape and type must be those wanted, so that no more memory is taken than the caller computed.
"""

from __future__ import annotations

import math
from collections.abc import Collection
from typing import Any

import h5py
import numpy as np
from numpy.typing import NDArray

Shape = tuple[int, ...]


class Unexpected(Exception):
    """What is not as it must be, in words that follow the file's name."""


def require_names(group: h5py.Group, allowed: Collection[str]) -> None:
    """Refuse a group that holds anything else than the names allowed."""
    for name in group:
        if name not in allowed:
            raise Unexpected(f"{group.name} holds {name[:60]!r}, which is not known")


def member(group: h5py.Group, name: str, kind: type[Any]) -> Any:
    """The group or dataset ``name``, which must be in the same file, not linked to from elsewhere."""
    where = f"{group.name.rstrip('/')}/{name}"
    links = group.id.links
    if not links.exists(name.encode()):
        raise Unexpected(f"{where} is missing")
    if links.get_info(name.encode()).type != h5py.h5l.TYPE_HARD:
        raise Unexpected(f"{where} is a link to another place")
    found = group[name]
    if not isinstance(found, kind):
        raise Unexpected(f"{where} is not a {kind.__name__.lower()}")
    return found


def dataset(group: h5py.Group, name: str) -> h5py.Dataset:
    """A dataset whose values lie in one piece in the file itself."""
    found = member(group, name, h5py.Dataset)
    plist = found.id.get_create_plist()
    plain = plist.get_layout() == h5py.h5d.CONTIGUOUS and not plist.get_external_count() and not plist.get_nfilters()
    if not plain:
        raise Unexpected(f"{found.name} is stored in pieces, by a filter or in another file")
    return found


def array(group: h5py.Group, name: str, shape: Shape, dtype: Any) -> NDArray[Any]:
    """Values of a dataset of this shape and type."""
    found = dataset(group, name)
    wanted = np.dtype(dtype)
    if not found.id.get_type().equal(h5py.h5t.py_create(wanted)):
        raise Unexpected(f"{found.name} holds another type than {wanted}")
    if found.shape != shape:
        raise Unexpected(f"{found.name} has the shape {found.shape}, not {shape}")
    if found.id.get_storage_size() != wanted.itemsize * math.prod(shape):
        raise Unexpected(f"{found.name} holds no values")
    values = found[()]
    if wanted.kind == "f" and not np.isfinite(values).all():
        raise Unexpected(f"{found.name} holds numbers that are not finite")
    return np.asarray(values, dtype=wanted.newbyteorder("="))


def text(group: h5py.Group, name: str, longest: int) -> str:
    """A text of fixed length, stored as one value, of at most ``longest`` bytes."""
    found = dataset(group, name)
    kind = found.id.get_type()
    if kind.get_class() != h5py.h5t.STRING or kind.is_variable_str() or found.shape != ():
        raise Unexpected(f"{found.name} is not one text of fixed length")
    if kind.get_size() > longest or found.id.get_storage_size() != kind.get_size():
        raise Unexpected(f"{found.name} is longer than {longest} bytes or holds nothing")
    try:
        return bytes(found[()]).decode("utf-8")
    except UnicodeDecodeError:
        raise Unexpected(f"{found.name} is not UTF-8 text") from None


def number(item: Any, name: str, dtype: Any) -> Any:
    """A scalar attribute of a numerical type."""
    wanted = np.dtype(dtype)
    where = f"the attribute {name} of {item.name}"
    if not h5py.h5a.exists(item.id, name.encode()):
        raise Unexpected(f"{where} is missing")
    found = h5py.h5a.open(item.id, name.encode())
    if found.shape != () or not found.get_type().equal(h5py.h5t.py_create(wanted)):
        raise Unexpected(f"{where} is not one number of type {wanted}")
    value = np.empty((), wanted)
    found.read(value)
    if not np.isfinite(value):
        raise Unexpected(f"{where} is not finite")
    return value[()].item()
