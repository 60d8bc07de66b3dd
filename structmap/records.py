"""What the frozen records of arrays have in common."""

from typing import Any

import numpy as np
from numpy.typing import DTypeLike, NDArray


def store_read_only(
    record: Any, name: str, dtype: DTypeLike, shape: tuple[int | None, ...]
) -> None:
    """Replace an array field of a frozen record by a checked, read-only copy.

    Parameters
    ----------
    record : object
        A frozen dataclass, while it is being made.
    name : str
        Name of the field.
    dtype : dtype_like
        Type that the array is stored in.
    shape : tuple of int or None
        Shape that it must have; None stands for any length.

    Raises
    ------
    ValueError
        If the shape is another one.
    """
    array: NDArray[Any] = np.array(getattr(record, name), dtype=dtype)
    fits = array.ndim == len(shape) and all(
        want is None or want == have
        for want, have in zip(shape, array.shape, strict=True)
    )
    if not fits:
        raise ValueError(f"{name} has shape {array.shape}; it must have {shape}")
    array.setflags(write=False)
    object.__setattr__(record, name, array)
