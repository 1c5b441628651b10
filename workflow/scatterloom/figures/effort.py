"""What the solves cost: products per incident wave, by size."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

from scatterloom.figures.picture import SERIES, Picture
from scatterloom.scattering.record import has_result

if TYPE_CHECKING:
    import xarray

ROWS_SHOWN = 40


def product_counts(table: xarray.Dataset, particle: int) -> Picture:
    """Products per wave against size parameter, with and without a start from neighbours.

    Parameters
    ----------
    table : xarray.Dataset
    particle : int
        Position of the particle; all wavelengths are drawn together.

    Returns
    -------
    Picture

    Raises
    ------
    ValueError
        If no case of the particle is solved.
    """
    part = table.isel(particle=particle)
    name = str(part["particle"].values)
    solved = has_result(part["status"].values)
    # A size parameter met at two wavelengths with one index is one case: draw it once.
    columns = np.stack(
        [
            part[v].values[solved]
            for v in ("size_parameter", "products", "cold_products_estimate", "wave_count")
        ],
        axis=1,
    )
    if columns.shape[0] == 0:
        raise ValueError(f"no solved case of {name}")
    columns = np.unique(columns, axis=0)
    x, products, cold, waves = columns.T

    figure = Figure(figsize=(3.4, 2.5))
    axes = figure.subplots()
    (c0, _, m0), (c1, _, m1) = SERIES[:2]
    axes.plot(
        x,
        cold,
        linestyle="none",
        color=c1,
        marker=m1,
        markerfacecolor="none",
        markersize=3.2,
        label="from zero (estimate)",
    )
    axes.plot(x, products, linestyle="none", color=c0, marker=m0, markersize=3.0, label="as solved")
    axes.set_ylim(bottom=0.0)
    axes.yaxis.set_major_locator(MaxNLocator(nbins=6))
    axes.set_xlabel("size parameter")
    axes.set_ylabel("products per wave, mean over lattices")
    axes.legend(loc="lower center", bbox_to_anchor=(0.5, 1.0), ncols=2)
    saved = 1.0 - float(products @ waves) / float(cold @ waves)
    keep = np.unique(np.linspace(0, x.size - 1, min(x.size, ROWS_SHOWN)).astype(int))
    return Picture(
        stem=f"products-{name}",
        title=f"Products per wave: {name}",
        caption=(
            "Products of the interaction matrix for each incident wave, as a mean over the "
            f"lattices, for {x.size} solved cases of {name}: as solved, with starts from "
            "neighbouring sizes where there were any, and the estimate for a start from zero. "
            f"Over all of them {100 * saved:.0f} % of the products were saved."
        ),
        alt=(
            f"Two sets of points against size parameter for {name}: products per wave as solved "
            f"between {products.min():.3g} and {products.max():.3g} (median "
            f"{np.median(products):.3g}), from zero between {cold.min():.3g} and {cold.max():.3g} "
            f"(median {np.median(cold):.3g})."
        ),
        figure=figure,
        header=["size parameter", "products per wave", "estimate from zero", "waves"],
        rows=[[x[i], products[i], cold[i], int(waves[i])] for i in keep],
    )
