"""Pictures of curves and titrations: which quantity stands in which panel, under which name."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from .plots import Line, Mark, Panel, svg

if TYPE_CHECKING:
    from .curves import Curve
    from .extraction import Reach, Workup
    from .salt_selection import SaltSelection
    from .titration import Titration

MOST_COMPOUNDS = 6  # of one picture: past that neither colours nor labels stay apart
FORM_SHOWN = 0.01  # least share, somewhere, of a form that has a curve
DRAWN = 0.0003  # share below which a form has no curve: it would lie on the axis
NAME_LENGTH = 40
MOST_DECADES = 8.0  # of a solubility: no solution follows the equation further
MINUS = "\N{MINUS SIGN}"
QUANTITIES = ("forms", "charge", "logd")


def curve_figure(curves: Sequence[Curve], shown: Sequence[str] = QUANTITIES, note: str = "") -> str:
    """Curves as an SVG: shares of the forms of each compound, then mean charge and log D of all.

    Parameters
    ----------
    curves : sequence of Curve
        One to six.
    shown : sequence of {"forms", "charge", "logd"}
        Which quantities.
    note : str
        Conditions, beside the name of the axis.

    Raises
    ------
    ValueError
        None, or more than six.
    """
    if not 0 < len(curves) <= MOST_COMPOUNDS:
        raise ValueError(f"a picture holds 1 to {MOST_COMPOUNDS} compounds, not {len(curves)}")
    ph = curves[0].ph
    names = [_short(curve.name or curve.structure) for curve in curves]
    alone = len(curves) == 1
    panels = []
    if "forms" in shown:
        panels += [
            Panel("" if alone else name, "share / %", _form_lines(curve), (0.0, 100.0), _marks(curve),
                  320.0 if alone else 200.0)
            for name, curve in zip(names, curves, strict=True)
        ]  # fmt: skip
    if "charge" in shown:
        lines = [
            _line(name, curve, curve.net_charge, n, alone) for n, (name, curve) in _numbered(names, curves)
        ]
        marks = _marks(curves[0]) if alone and not panels else ()
        panels.append(Panel("", "net charge", lines, _whole(lines, 0.0), marks, 190.0 if alone else 260.0))
    if "logd" in shown:
        lines = [
            _line(name, curve, curve.log_d, n, alone)
            for n, (name, curve) in _numbered(names, curves)
            if curve.log_d is not None and np.isfinite(curve.log_d).any()
        ]
        if lines:
            panels.append(Panel("", "log D", lines, _whole(lines), (), 190.0 if alone else 260.0))
    if not panels:
        raise ValueError(
            "log D needs log P, and a compound with a fixed charge has none: give it with --logp"
        )
    label = "pH" + (f"  ({note})" if note else "")
    return svg(panels, x_label=label, x_range=(float(ph[0]), float(ph[-1])), title=names[0] if alone else "")


def titration_figure(done: Titration, name: str, note: str = "") -> str:
    """A titration curve as an SVG, its visible equivalence points marked.

    Parameters
    ----------
    done : Titration
    name : str
        Of the compound.
    note : str
        Of the titrant and the conditions, beside the name of the axis.
    """
    low, high = _whole([Line("", done.volume, done.ph, 0)])
    marks = [
        Mark(point.volume, f"{point.volume:.2f} mL, pH {point.ph:.2f}", point.ph)
        for point in done.equivalences
        if point.visible
    ]
    panel = Panel(
        "", "pH", [Line("", done.volume, done.ph, 0)], (min(low, 2.0), max(high, 12.0)), marks, 420.0
    )
    label = "volume of titrant / mL" + (f"  ({note})" if note else "")
    return svg([panel], x_label=label, x_range=(0.0, float(done.volume[-1])), title=_short(name))


def workup_figure(done: Workup, note: str = "") -> str:
    """Shares in the organic layer and out of the water against pH as an SVG, the chosen pH values marked.

    Parameters
    ----------
    done : Workup
        One to six compounds that can be computed.
    note : str
        Conditions, beside the name of the axis.

    Raises
    ------
    ValueError
        None, or more than six.
    """
    drawn = [one for one in done.compounds if one.partition is not None]
    if not 0 < len(drawn) <= MOST_COMPOUNDS:
        raise ValueError(f"a picture holds 1 to {MOST_COMPOUNDS} compounds, not {len(drawn)}")
    setting, ph = done.setting, done.setting.grid(0.05)
    names = [_short(one.name or one.structure) for one in drawn]
    alone = len(drawn) == 1
    stays, returns = [], []
    for n, one in enumerate(drawn):
        assert one.partition is not None
        coefficient = one.partition.coefficients(ph)[0]
        name = "" if alone else names[n]
        stays.append(Line(name, ph, 100.0 * setting.stays(coefficient), n))
        returns.append(Line(name, ph, 100.0 * setting.returns(coefficient), n))
    washes: list[Mark] = []
    back: list[Mark] = []
    if done.plan is not None:
        for n, (value, values) in enumerate(zip(done.plan.washes, done.plan.returns, strict=True), start=1):
            washes.append(Mark(value, f"wash {n}, pH {value:g}"))
            back += [Mark(other, f"water {n}, pH {other:g}") for other in values]
    elif alone:
        washes, back = ([_reached(goes)] for goes in (drawn[0].into_water, drawn[0].back) if goes)
    portions = f"{setting.washes} x {setting.aqueous:g} mL of water, {setting.organic:g} mL of solvent"
    label = "pH  (" + "; ".join(part for part in (portions, note) if part) + ")"
    panels = [
        Panel("Washing: what stays in the organic layer", "share / %", stays, (0.0, 100.0), washes, 250.0),
        Panel("Back: what comes out of the water", "share / %", returns, (0.0, 100.0), back, 250.0),
    ]
    return svg(
        panels, x_label=label, x_range=(setting.lowest, setting.highest), title=names[0] if alone else ""
    )


def _reached(goes: Reach) -> Mark:
    if goes.ph is not None:
        return Mark(goes.ph, f"pH {goes.ph:.1f}")
    return Mark(goes.best_ph, f"at best {100 * goes.best:.0f} %, pH {goes.best_ph:.1f}")


def solubility_figure(found: Sequence[SaltSelection], note: str = "") -> str:
    """Solubility against pH as an SVG, the pH of maximum solubility marked.

    Parameters
    ----------
    found : sequence of SaltSelection
        One to six that have a solubility; of one whose intrinsic solubility is not known the relative one is shown.
    note : str
        Conditions, beside the name of the axis.

    Raises
    ------
    ValueError
        None, or more than six.
    """
    drawn = [(one, one.dissolution) for one in found if one.dissolution is not None]
    if not 0 < len(drawn) <= MOST_COMPOUNDS:
        raise ValueError(f"a picture holds 1 to {MOST_COMPOUNDS} compounds that make salts, not {len(drawn)}")
    ph = np.linspace(0.0, 14.0, 561)
    names = [_short(one.name or one.structure) for one, _ in drawn]
    known, alone = drawn[0][0].known, len(drawn) == 1
    lines, marks = [], []
    for n, (name, (_, solution)) in enumerate(zip(names, drawn, strict=True)):
        scale = solution.molar_mass if known else 1.0
        lines.append(Line("" if alone else name, ph, np.log10(solution.at(ph) * scale), n))
        if solution.ph_max is not None:
            value = solution.ph_max[0]
            level = float(np.log10(solution.at([value])[0] * scale))
            marks.append(Mark(value, f"pH of maximum solubility {value:.2f}".replace("-", MINUS), level))
    low, high = _whole(lines)
    high = min(high, low + MOST_DECADES)
    lines = [replace(line, y=np.where(line.y > high, np.nan, line.y)) for line in lines]
    panel = Panel(
        "",
        "log (S / mg/mL)" if known else "log (S / S of no net charge)",
        lines,
        (low, high),
        [mark for mark in marks if 0.0 <= mark.x <= 14.0],
        420.0,
    )
    label = "pH" + (f"  ({note})" if note else "")
    return svg([panel], x_label=label, x_range=(0.0, 14.0), title=names[0] if alone else "")


def charge_name(charge: int) -> str:
    """Name of the forms of one net charge.

    Examples
    --------
    >>> charge_name(1), charge_name(-2)
    ('charge +1', 'charge −2')
    """
    return f"charge {charge:+d}".replace("-", MINUS)


def _numbered(names: Sequence[str], curves: Sequence[Curve]) -> list[tuple[int, tuple[str, Curve]]]:
    return list(enumerate(zip(names, curves, strict=True)))


def _short(name: str) -> str:
    return name if len(name) <= NAME_LENGTH else name[: NAME_LENGTH - 1] + "…"


def _line(name: str, curve: Curve, y: object, n: int, alone: bool) -> Line:
    return Line("" if alone else name, curve.ph, np.asarray(y, dtype=np.float64), n)


def _form_lines(curve: Curve) -> list[Line]:
    """A curve for each net charge; without any net charge one for the neutral form and one for the zwitterion."""
    forms = []
    for place, charge in enumerate(curve.charges):
        if charge:
            forms.append((charge_name(charge), curve.shares[:, place]))
        else:
            forms += [("neutral form", curve.neutral), ("zwitterion", curve.zwitterion)]
    seen = [(name, share) for name, share in forms if share.max() >= FORM_SHOWN]
    return [
        Line(name, curve.ph, np.where(share < DRAWN, np.nan, 100.0 * share), n)
        for n, (name, share) in enumerate(seen)
    ]


def _marks(curve: Curve) -> list[Mark]:
    return [Mark(value, f"{name} {value:.2f}".replace("-", MINUS)) for name, value in curve.constants]


def _whole(lines: Sequence[Line], *also: float) -> tuple[float, float]:
    """Whole numbers around all values, at least one unit apart."""
    values = np.concatenate([np.asarray(also, dtype=np.float64), *(line.y for line in lines)])
    values = values[np.isfinite(values)]
    low, high = float(np.floor(values.min() + 1e-6)), float(np.ceil(values.max() - 1e-6))
    return low, max(high, low + 1.0)
