"""Charts, in one style that reads in black and white print and without colour vision.

The only module that loads matplotlib, and it is loaded only when a chart is asked for. Lines differ by dash and are labelled where
they run; colours (the eight of Okabe and Ito, 2008) only repeat that. `Figure` is used and not pyplot: no window, no state.
"""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import matplotlib as mpl
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from tinctor.operations.dilution import DilutionResponse
    from tinctor.operations.overlap import OverlapResponse, WindowOut
    from tinctor.operations.plan_in import SpectraOut
    from tinctor.operations.wavelengths import WavelengthsResponse

__all__ = ["dilution_figure", "overlap_figure", "save", "wavelengths_figure"]

#: Okabe and Ito's palette without yellow, which is too light on paper.
COLOURS: Final = ("#0072B2", "#D55E00", "#009E73", "#CC79A7", "#000000", "#56B4E9", "#E69F00")
DASHES: Final = ("-", (0, (6, 2)), (0, (1.5, 1.5)), (0, (6, 2, 1.5, 2)), (0, (10, 3)), (0, (3, 1, 1, 1, 1, 1)), (0, (1, 3)))
#: More circles than this hide the curves.
MOST_CIRCLES: Final = 25
#: Inches: fits between the margins of A4 and of Letter.
WIDE: Final = (7.2, 7.0)
STYLE: Final[Any] = {
    "font.size": 9,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.linewidth": 0.8,
    "lines.linewidth": 1.5,
    "svg.fonttype": "none",  # words stay words: searchable, and editable
    "svg.hashsalt": "tinctor",  # the same answer gives the same file
    "pdf.fonttype": 42,
    "figure.constrained_layout.use": True,
}


def save(figure: Figure, path: Path, form: str) -> None:
    """Write a figure as svg, png or pdf, with no date in it."""
    dates = {"svg": {"Date": None}, "pdf": {"CreationDate": None, "ModDate": None}}
    with mpl.rc_context(STYLE):
        figure.savefig(path, format=form, dpi=200, metadata=dates.get(form))


def overlap_figure(response: OverlapResponse) -> Figure:
    """Return absorptivity spectra with crossings and clear windows, and the matrix of similarities."""
    assert response.spectra is not None
    with mpl.rc_context(STYLE):
        figure = Figure(figsize=WIDE)
        top, below = figure.subplots(2, 1, height_ratios=[1, 1])
        _spectra(top, response.spectra, "absorptivity")
        _windows(top, response.clear_windows)
        crossings = [(c.wavelength_nm, c.absorptivity) for c in response.crossings]
        if 0 < len(crossings) <= MOST_CIRCLES:
            top.plot(
                *zip(*crossings, strict=True), linestyle="none", marker="o", markerfacecolor="white", color="black", markersize=5
            )
        circles = "; circles: equal absorptivities" if len(crossings) <= MOST_CIRCLES else ""
        _title(top, f"Absorptivity{circles}; grey: clear windows")
        _similarity(below, [c.name for c in response.components], response.similarity)
    return figure


def wavelengths_figure(response: WavelengthsResponse) -> Figure:
    """Return absorptivity spectra with the wavelengths chosen, and uncertainty against their number."""
    assert response.spectra is not None
    with mpl.rc_context(STYLE):
        figure = Figure(figsize=WIDE)
        top, below = figure.subplots(2, 1, height_ratios=[1.2, 1])
        _spectra(top, response.spectra, "absorptivity")
        _windows(top, response.clear_windows)
        for k, w in enumerate(response.wavelengths_nm):
            top.axvline(w, color="black", linewidth=0.8)
            height = 1.0 + 0.05 * (k % 2)  # two rows, so that neighbours stay readable
            top.text(w, height, f"{w:g}", transform=top.get_xaxis_transform(), ha="center", va="bottom", fontsize=7)
        _title(top, "Wavelengths chosen (lines), absorptivity, clear windows (grey)", pad=20)
        counts = [row.count for row in response.table]
        _against_count(below, counts, [row.worst_relative_u for row in response.table], "worst component, full budget", 0)
        _against_count(below, counts, [row.criterion_value for row in response.table], f"criterion {response.criterion}", 1)
        every = max((e.relative_u for e in response.expected_u_all_candidates if e.relative_u is not None), default=None)
        if every is not None:
            label = f"worst component, full budget, all {response.all_candidates} candidates"
            below.axhline(100 * every, color="black", linewidth=0.8, linestyle=DASHES[2], label=label)
        below.set_xlabel("number of wavelengths")
        _from_zero(below)
        below.xaxis.set_major_locator(MaxNLocator(integer=True))
        below.legend(frameon=False)
        _title(below, "What more wavelengths would bring")
    return figure


def dilution_figure(response: DilutionResponse) -> Figure:
    """Return the planned absorbance of the best choices with the window, and the expected uncertainties of all listed."""
    assert response.spectra is not None
    choices = response.choices or response.together
    with mpl.rc_context(STYLE):
        figure = Figure(figsize=WIDE)
        top, below = figure.subplots(2, 1, height_ratios=[1.2, 1])
        _diluted(top, response, 3 if response.choices else 2)
        names = [part.name for part in choices[0].expected_relative_u]
        for j, name in enumerate(names):
            values = [c.expected_relative_u[j] for c in choices]
            heights = [
                100 * v.expected_relative_u if v.served and v.expected_relative_u is not None else float("nan") for v in values
            ]
            below.plot(
                range(1, len(choices) + 1), heights, linestyle="none", marker="osD^vP*"[j % 7], color=COLOURS[j % len(COLOURS)],
                markerfacecolor="none", label=_plain(name),
            )  # fmt: skip
        labels = [f"{c.dilution_factor:.4g}×\n{c.path_length_cm:g} cm" for c in choices]
        below.set_xticks(range(1, len(choices) + 1), labels, fontsize=8)
        _from_zero(below)
        below.legend(frameon=False)
        _title(below, "Expected uncertainty of each choice, in the order recommended (no mark: does not serve)")
    return figure


def _diluted(axes: Axes, response: DilutionResponse, shown: int) -> None:
    spectra = response.spectra
    assert spectra is not None
    total = [sum(column) for column in zip(*spectra.absorbance, strict=True)]
    low, high = response.provenance.settings["absorbance_window"]
    axes.axhspan(low, high, color="0.9", linewidth=0)
    for k, choice in enumerate((response.choices or response.together)[:shown]):
        scale = choice.path_length_cm / choice.dilution_factor
        heights = [a * scale for a in total]
        axes.plot(
            spectra.wavelength_nm, heights, linestyle=DASHES[k % len(DASHES)], color=COLOURS[k % len(COLOURS)],
            label=f"{choice.dilution_factor:.4g} times, {choice.path_length_cm:g} cm",
        )  # fmt: skip
    axes.set_ylim(0, 1.5 * high)
    axes.set_xlabel("wavelength / nm")
    axes.set_ylabel("absorbance")
    axes.legend(frameon=False)
    _title(axes, f"Planned absorbance; grey: the window from {low:g} to {high:g}")


def _spectra(axes: Axes, spectra: SpectraOut, quantity: str) -> None:
    """Lines labelled at their highest point."""
    units = sorted(set(spectra.absorptivity_unit))
    for k, (name, values) in enumerate(zip(spectra.names, spectra.absorptivity, strict=True)):
        colour = COLOURS[(k + k // len(COLOURS)) % len(COLOURS)]  # dashes come round after seven, then with another colour
        marker = "." if len(values) < 30 else ""
        axes.plot(spectra.wavelength_nm, values, linestyle=DASHES[k % len(DASHES)], color=colour, marker=marker)
        top = max(range(len(values)), key=values.__getitem__)
        span = spectra.wavelength_nm[-1] - spectra.wavelength_nm[0]
        along = (spectra.wavelength_nm[top] - spectra.wavelength_nm[0]) / span if span > 0 else 0.5
        side = "left" if along < 0.1 else "right" if along > 0.9 else "center"  # a label stays inside the axes
        axes.annotate(
            _plain(name), (spectra.wavelength_nm[top], values[top]), textcoords="offset points", xytext=(0, 3), ha=side,
            fontsize=8, bbox={"facecolor": "white", "edgecolor": "none", "pad": 0.5, "alpha": 0.8},
        )  # fmt: skip
    axes.set_xlabel("wavelength / nm")
    axes.set_ylabel(f"{quantity} / ({', '.join(units)})")
    axes.margins(x=0.01, y=0.1)


def _windows(axes: Axes, windows: Sequence[WindowOut]) -> None:
    for w in windows:
        axes.axvspan(w.low_nm, w.high_nm, color="0.88", linewidth=0, zorder=0)
        label = "baseline" if w.component is None else w.component
        if w.high_nm > w.low_nm:
            middle = (w.low_nm + w.high_nm) / 2
            axes.text(
                middle, 0.98, _plain(label), transform=axes.get_xaxis_transform(), rotation=90, ha="center", va="top",
                fontsize=7, color="0.3",
            )  # fmt: skip


def _similarity(axes: Axes, names: Sequence[str], matrix: Sequence[Sequence[float]]) -> None:
    """Grey fields with their numbers: dark where two spectra are alike."""
    axes.imshow([[max(value, 0.0) for value in row] for row in matrix], cmap="Greys", vmin=0.0, vmax=1.3, aspect="auto")
    for i, row in enumerate(matrix):
        for j, value in enumerate(row):
            axes.text(j, i, f"{value:.3f}", ha="center", va="center", color="white" if value > 0.75 else "black")
    labels = [_plain(name) for name in names]
    axes.set_xticks(range(len(names)), labels, rotation=20, ha="right")
    axes.set_yticks(range(len(names)), labels)
    axes.spines[:].set_visible(False)
    _title(axes, "Similarity (cosine of the spectra): 1 is the same shape")


def _against_count(axes: Axes, counts: Sequence[int], values: Sequence[float | None], label: str, k: int) -> None:
    heights = [float("nan") if value is None else 100 * value for value in values]
    axes.plot(counts, heights, linestyle=DASHES[k], color=COLOURS[k], marker="os"[k], markerfacecolor="white", label=label)


def _from_zero(axes: Axes) -> None:
    axes.set_ylabel("relative standard uncertainty / %")
    axes.margins(y=0.1)
    axes.set_ylim(bottom=0)


def _title(axes: Axes, text: str, pad: float = 6) -> None:
    axes.set_title(text, loc="left", fontsize=9, pad=pad)


def _plain(text: str) -> str:
    """A name as it is: no mathematics between dollar signs, no control characters."""
    return "".join(c if c.isprintable() else "·" for c in text).replace("$", r"\$")
