"""Results as bytes and back, to the bit, without pickle: reading them can run no code.

What is encoded: None, booleans, whole numbers, floats, words, tuples, lists, mappings, arrays, members of the enums
of geoves, and its own frozen classes (attrs and named tuples), nested as they like. The tree is JSON, the arrays stand
behind it in numpy's own format (which holds shapes and numbers only where pickle is refused).
"""

import hashlib
import io
import json
import sys
from collections.abc import Sequence
from enum import Enum
from functools import partial
from typing import Any

import attrs
import numpy as np
from numpy.lib import format as npy
from numpy.typing import NDArray

_PACKAGE = __name__.partition(".")[0]
_LENGTH = 8  # bytes of the length of the tree
_PLAIN = {"tuple": tuple, "list": list, "dict": dict}


def encode(thing: Any) -> bytes:
    """The bytes of a thing. Raises TypeError where it holds something that this module does not know."""
    arrays: list[NDArray[Any]] = []
    tree = json.dumps(_to_tree(thing, arrays), separators=(",", ":")).encode()
    stream = io.BytesIO()
    stream.write(len(tree).to_bytes(_LENGTH) + tree)
    for array in arrays:
        npy.write_array(stream, array, allow_pickle=False)
    return stream.getvalue()


def decode(encoded: bytes) -> Any:
    """The thing that was encoded. Raises ValueError, TypeError or another error where the bytes are not of `encode`."""
    stream = io.BytesIO(encoded)
    length = int.from_bytes(stream.read(_LENGTH))
    tree = json.loads(stream.read(length))
    arrays = []
    while stream.tell() < len(encoded):
        arrays.append(npy.read_array(stream, allow_pickle=False))
    return _from_tree(tree, arrays)


def fingerprint(*things: Any) -> str:
    """SHA-256 of what the things hold; functions and partial calls of geoves are told by their names.

    Raises TypeError as `encode` does.
    """
    return hashlib.sha256(encode(tuple(_name_work(thing) for thing in things))).hexdigest()


def _name_work(thing: Any) -> Any:
    if isinstance(thing, partial):
        return "partial", _name_work(thing.func), thing.args, dict(sorted(thing.keywords.items()))
    if callable(thing) and hasattr(thing, "__qualname__"):
        return "function", _name(thing)
    return thing


def _to_tree(thing: Any, arrays: list[NDArray[Any]]) -> Any:
    """A tree that JSON can hold: what is not plain is a mapping of its kind, its class if it has one, and its values.

    Arrays go into the list and leave their number.
    """
    if thing is None or type(thing) in (bool, int, float, str):
        return thing
    if type(thing) is np.ndarray or isinstance(thing, np.generic):
        arrays.append(np.asarray(thing))
        return {"kind": "array" if type(thing) is np.ndarray else "scalar", "values": len(arrays) - 1}
    kind, own, values = _take_apart(thing)
    return {"kind": kind, "class": own, "values": [_to_tree(one, arrays) for one in values]}


def _take_apart(thing: Any) -> tuple[str, str, Sequence[Any]]:
    """The kind of a thing, its class if it is one of geoves, and what it holds."""
    own = type(thing)
    if own in (tuple, list):
        return own.__name__, "", thing
    if own is dict:
        return "dict", "", tuple(thing.items())
    if isinstance(thing, Enum):
        return "enum", _name(own), (thing.value,)
    if isinstance(thing, tuple) and hasattr(thing, "_fields"):
        return "named", _name(own), thing
    if attrs.has(own) and all(field.init for field in attrs.fields(own)):
        return "attrs", _name(own), [getattr(thing, field.name) for field in attrs.fields(own)]
    raise TypeError(f"a thing of the kind {own.__name__} is not encoded")


def _from_tree(tree: Any, arrays: list[NDArray[Any]]) -> Any:
    if not isinstance(tree, dict):
        return tree
    kind, held = tree["kind"], tree["values"]
    if kind in ("array", "scalar"):
        return arrays[held] if kind == "array" else arrays[held][()]
    values = [_from_tree(one, arrays) for one in held]
    if kind in _PLAIN:
        return _PLAIN[kind](values)
    own = _find_class(tree["class"])
    if kind == "attrs":
        names = [field.alias for field in attrs.fields(own)]
        return own(**dict(zip(names, values, strict=True)))
    return own(*values)


def _name(thing: Any) -> str:
    """Module and name of a class or function of geoves; TypeError for any other: it would not be found again."""
    named = f"{thing.__module__}:{thing.__qualname__}"
    if thing.__module__.partition(".")[0] != _PACKAGE or "<" in named:
        raise TypeError(f"{named} is not of {_PACKAGE}")
    return named


def _find_class(name: str) -> type[Any]:
    """A class of geoves that holds values and nothing else, in a module that is loaded: none is imported for a name."""
    module, _, path = name.partition(":")
    if module.partition(".")[0] != _PACKAGE or "." in path:
        raise ValueError(f"{name} is not of {_PACKAGE}")
    found: Any = getattr(sys.modules.get(module), path, None)
    if not isinstance(found, type) or found.__module__ != module or not _holds_values(found):
        raise ValueError(f"{name} is not a class of values")
    return found


def _holds_values(own: type[Any]) -> bool:
    return attrs.has(own) or issubclass(own, Enum) or hasattr(own, "_fields")
