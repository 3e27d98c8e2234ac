"""The plot of a calibration: the points with the curve, and what the curve leaves of them."""

from itertools import cycle

import numpy as np

from sapflux.errors import Fault, UserError
from sapflux.physics import dissipation

# Colours that differ for every kind of colour vision. Source: Okabe & Ito (2008), Color Universal
# Design. Eight markers with seven colours tell 56 stems apart.
COLOURS = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#56B4E9", "#E69F00", "#000000")
MARKERS = ("o", "s", "^", "D", "v", "P", "X", "*")
MOST_NAMED = 20  # stems that a legend has room for
GRAMS = 1e3
SIZE = (10.0, 4.6)  # inches
SETTINGS = {"svg.hashsalt": "sapflux", "svg.fonttype": "path", "font.size": 9.5}


def draw(fitted, path):
    """Write the plot of a `Fitted` calibration as SVG; the same calibration gives the same bytes.

    Left the points, the fitted mean and the general calibration for comparison; right the
    relative residuals (flux - mean) / mean, both against the flow index. UserError where the file
    cannot be written.
    """
    import matplotlib
    from matplotlib.figure import Figure

    with matplotlib.rc_context(SETTINGS):
        figure = Figure(figsize=SIZE, layout="constrained")
        left, right = figure.subplots(1, 2, sharex=True)
        _points(fitted, left, right)
        _curves(fitted, left)
        spread = fitted.law.residual_spread
        right.axhline(0.0, color="black", linewidth=1.0)
        for side in (-spread, spread):
            right.axhline(side, color="black", linewidth=0.8, linestyle=":")
        left.set_title("Gravimetric flux and its mean")
        right.set_title(f"Residuals; dotted their spread, {spread:.1%}")
        left.set_ylabel("Sap flux density (g m$^{-2}$ s$^{-1}$)")
        right.set_ylabel("Residual: (flux - mean) / mean (1)")
        for axes in (left, right):
            axes.set_xlabel("Flow index K (1)")
            axes.set_xlim(left=0.0)
            axes.grid(linewidth=0.4, alpha=0.5)
        about = f", {fitted.species}" if fitted.species else ""
        figure.suptitle(f"{fitted.name}{about}, heating {fitted.heating}", parse_math=False)
        if fitted.law.stems <= MOST_NAMED:
            figure.legend(loc="outside lower center", ncols=6, frameon=False)
        try:
            path.parent.mkdir(parents=True, exist_ok=True)
            figure.savefig(path, format="svg", metadata={"Date": None})
        except OSError as error:
            what = f"the plot cannot be written ({error.strerror})"
            raise UserError(Fault(str(path), what, "Choose another --out.")) from None


def _points(fitted, left, right):
    stems = list(dict.fromkeys(row.stem for row in fitted.rows))
    for stem, colour, marker in zip(stems, cycle(COLOURS), cycle(MARKERS), strict=False):
        own = [row for row in fitted.rows if row.stem == stem]
        index = np.array([row.flow_index for row in own])
        flux = np.array([row.flux_g_m2_s for row in own])
        style = {"color": colour, "marker": marker, "linestyle": "none", "markersize": 5.5,
                 "alpha": 0.85}  # fmt: skip
        name = (stem if not stem.startswith("_") else f" {stem}").replace("$", r"\$")
        left.plot(index, flux, label=name or "points", **style)
        right.plot(index, flux / fitted.law.mean(index) - 1.0, **style)


def _curves(fitted, axes):
    law = fitted.law
    index = np.linspace(law.lowest, law.highest, 200)
    axes.plot(
        index, law.mean(index), color="black", linewidth=1.6,
        label=f"{law.factor:.4g} K^{law.exponent:.3f}",
    )  # fmt: skip
    if fitted.heating == "continuous":
        axes.plot(
            index, GRAMS * dissipation.flux_density(index), color="black", linewidth=1.2,
            linestyle="--", label="general calibration",
        )  # fmt: skip
