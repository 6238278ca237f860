"""Arguments of an array call as what the batch driver reads: a column of doubles for each number that a point takes."""

from collections.abc import Mapping
from numbers import Real

import numpy as np


def as_floats(value, name):
    """The value as an array of doubles. Raises TypeError for what is not numbers."""
    array = np.asarray(value)
    if array.dtype == float:
        return array
    kind = array.dtype.kind
    if kind not in "fiub" and not (kind == "O" and all(isinstance(item, Real) for item in array.flat)):
        raise TypeError(f"{name}: real numbers wanted, not {type(value).__name__} ({array.dtype})")
    return array.astype(float)


def common_shape(shapes):
    """The shape to which the shapes of (name, shape) pairs broadcast. Raises ValueError."""
    distinct = {shape for _, shape in shapes if shape}
    if len(distinct) < 2:
        return distinct.pop() if distinct else ()
    try:
        return np.broadcast_shapes(*distinct)
    except ValueError:
        told = ", ".join(f"{name} {shape}" for name, shape in shapes if shape)
        raise ValueError(f"these shapes do not broadcast: {told}") from None


def as_vectors(value, names, option):
    """A direction or weights as an array (..., K) for the K names, from such an array or {name: number or array}."""
    if isinstance(value, Mapping):
        strangers = [name for name in value if name not in names]
        if strangers:
            raise ValueError(f"{option}: {strangers[0]!r} is not one of {', '.join(names)}")
        parts = {name: as_floats(value.get(name, 0.0), f"{option}[{name!r}]") for name in names}
        shape = common_shape([(name, part.shape) for name, part in parts.items()])
        return np.stack([np.broadcast_to(part, shape) for part in parts.values()], axis=-1)
    array = as_floats(value, option)
    if array.ndim == 0 or array.shape[-1] != len(names):
        wanted = f"{len(names)}: {', '.join(names)}"
        raise ValueError(f"{option} has the shape {array.shape}; its last axis has to be {wanted}")
    return array


def column(array, shape):
    """(1-D array of doubles, stride in doubles) of the array broadcast to a shape; copied only where it must be."""
    if array.size == 1:
        return array.reshape(-1), 0
    flat = (array if array.shape == shape else np.broadcast_to(array, shape)).reshape(-1)
    if not flat.flags.aligned or flat.strides[0] % flat.itemsize:
        flat = flat.copy()
    return flat, flat.strides[0]//flat.itemsize


def target(given, name, shape, dtype, inputs):
    """(array to fill, array to return) for results: `given` serves for both where the driver can write into it."""
    if given is None:
        made = np.empty(shape, dtype)
        return made, made
    if not isinstance(given, np.ndarray) or given.shape != shape:
        what = f"an array of shape {given.shape}" if isinstance(given, np.ndarray) else type(given).__name__
        raise ValueError(f"{name} is {what}; an array of shape {shape} is wanted")
    if not given.flags.writeable or not np.can_cast(dtype, given.dtype, "same_kind"):
        state = "" if given.flags.writeable else ", read only"
        raise ValueError(f"{name} cannot take the results: it is {given.dtype}{state}")
    fits = given.dtype == dtype and given.flags.c_contiguous and given.flags.aligned
    if fits and not any(np.may_share_memory(given, other) for other in inputs):
        return given, given
    return np.empty(shape, dtype), given
