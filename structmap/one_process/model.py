"""The record of a model: what it is called, its parameters, its function."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
Scale = Literal["log", "linear"]
Sign = Literal["free", "nonnegative"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Parameter:
    """A parameter that is searched for on a grid.

    Attributes
    ----------
    name : str
        As it is shown (``tau``, ``k_ex``).
    unit : str
        Unit of measurement of the value (``s``, ``s-1``, ``M``, ``K``); blank for none.
    bounds : callable
        Takes x, shape (n_points,), and returns the lowest and highest value searched.
    scale : {'log', 'linear'}
        How the nodes of the grid are spaced.
    nodes : int
        Nodes a decade for ``log``, nodes in all for ``linear``.
    """

    name: str
    unit: str
    bounds: Callable[[FloatArray], tuple[float, float]]
    scale: Scale = "log"
    nodes: int = 40

    def grid(self, x: FloatArray) -> FloatArray:
        """Return the nodes for points at x.

        Parameters
        ----------
        x : ndarray of float, shape (n_points,)
            Where the profile was measured.

        Returns
        -------
        ndarray of float, shape (n_nodes,)
            Rising, evenly spaced in the value or in its logarithm.

        Raises
        ------
        ValueError
            If the bounds do not rise, or a logarithmic one is not above 0.
        """
        low, high = self.bounds(x)
        if not low < high or (self.scale == "log" and not low > 0):
            raise ValueError(f"bounds of {self.name} are {low} and {high}")
        if self.scale == "linear":
            return np.linspace(low, high, self.nodes)
        n_nodes = max(3, round(self.nodes * np.log10(high / low)) + 1)
        return np.geomspace(low, high, n_nodes)


@dataclass(frozen=True, slots=True, kw_only=True)
class Model:
    """A model of the form value = baseline + amplitude * function(x; parameters).

    Attributes
    ----------
    name : str
        As in settings and tables (``mas-r1rho``).
    describes : str
        What it describes, a phrase.
    function : callable
        ``function(x, shared, companion, local)`` with as many parameters as the record
        names, in that order. Parameters may be arrays of shape (..., 1) against x of
        shape (n_points,); the result has their common shape.
    shared : Parameter
        The parameter that a group may share and that is reported.
    companion : Parameter or None
        A second parameter that is shared with it (the population in exchange).
    local : Parameter or None
        A parameter of each site that enters nonlinearly.
    amplitude : {'free', 'nonnegative', 'unit'}
        ``unit`` fixes the amplitude at 1.
    baseline : {'free', 'nonnegative', 'none'}
        ``none`` fixes the baseline at 0.
    x_unit : str
        Base unit of x (``Hz``, ``s``, ``M``, ``K``); blank takes x as it is.
    x_lowest : float
        Lowest x with a meaning.
    min_points : int
        Sites with fewer points are left out.
    source : str
        Where the equations were published.
    point_names : tuple of str
        Where x only counts the points (0, 1, …), what each of them is.
    n_baselines : int
        Baselines of a site: one for each block of points (`Profiles.block`).

    Notes
    -----
    A model of one's own needs a name, a function and one parameter::

        stretched = Model(
            name="stretched",
            describes="stretched exponential decay with exponent 0.5",
            function=lambda x, rate: np.exp(-np.sqrt(rate * x)),
            shared=Parameter(
                name="k", unit="s-1", bounds=lambda x: (0.01 / x.max(), 100 / x.max())
            ),
            x_unit="s",
        )
    """

    name: str
    describes: str
    function: Callable[..., FloatArray]
    shared: Parameter
    companion: Parameter | None = None
    local: Parameter | None = None
    amplitude: Literal["free", "nonnegative", "unit"] = "free"
    baseline: Literal["free", "nonnegative", "none"] = "free"
    x_unit: str = ""
    x_lowest: float = 0.0
    min_points: int = 5
    source: str = ""
    point_names: tuple[str, ...] = ()
    n_baselines: int = 1

    def name_point(self, x: float) -> str:
        """Return what a point is called.

        Parameters
        ----------
        x : float
            Where it was measured, in the base unit.

        Returns
        -------
        str
            For example ``x = 0.5 s`` or ``R1 at 600 MHz``.
        """
        if self.point_names:
            return self.point_names[int(x)]
        return f"x = {x:g} {self.x_unit}".rstrip()

    @property
    def n_linear(self) -> int:
        """Return number of linear parameters of a site.

        Returns
        -------
        int
            Number of linear parameters of a site.
        """
        baselines = 0 if self.baseline == "none" else self.n_baselines
        return (self.amplitude != "unit") + baselines

    @property
    def n_own(self) -> int:
        """Return number of parameters that each site has of its own.

        Returns
        -------
        int
            Number of parameters that each site has of its own.
        """
        return self.n_linear + (self.local is not None)

    @property
    def n_shared(self) -> int:
        """Return number of parameters that a group may share.

        Returns
        -------
        int
            Number of parameters that a group may share.
        """
        return 1 + (self.companion is not None)
