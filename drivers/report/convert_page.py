"""The page of a conversion."""

from __future__ import annotations

from dataclasses import replace

from drivers.report.axes import FIRST, SECOND, label_lines, small_figure
from drivers.report.constants import constants_table
from drivers.report.fit import fit_tables
from drivers.report.page import Fact, Origin, Page, Picture, picture
from drivers.report.parts import parts_of
from drivers.report.shift_plot import LawLine, common_span, draw_laws, draw_laws_apart
from drivers.report.spectrum_plot import Curve, draw_master_curves
from drivers.report.tables import conversion_tables, temperature_text
from matlib.card import Card
from matlib.card_conversion import ConvertedCard

__all__ = ["convert_page"]


def convert_page(converted: ConvertedCard, old: Card, new: Card, origin: Origin) -> Page:
    """Whether the new card says the same, both laws, and what lies between them.

    Parameters
    ----------
    converted : ConvertedCard
    old, new : Card
        The card that was converted, and the one that was made of it.
    origin : Origin
    """
    conversion = converted.conversion
    captions = ["The new shift law, in the units of the new card"]
    parts = parts_of([*conversion_tables(converted, new.file, old.temperature_unit), *fit_tables(converted)], captions)
    facts = [Fact(label="Conversion", value="exact" if conversion.exact else f"inexact: {conversion.method}")]
    if not conversion.exact:
        at = "" if conversion.error_at is None else f"at {temperature_text(conversion.error_at, old.temperature_unit)}"
        error = f"{conversion.largest_error_decades:.3g} decades of a_T"
        facts.append(Fact(label="Largest error", value=error, against=at))
    if converted.service_error is not None:
        decades, T = converted.service_error
        at = f"at {temperature_text(T, old.temperature_unit)}, outside the range it was made for"
        facts.append(Fact(label="Over the service window", value=f"{decades:.3g} decades", against=at))
    if conversion.time_factor != 1.0:
        moved = "relaxation times multiplied, as the reference moved"
        facts.append(Fact(label="Time factor", value=f"{conversion.time_factor:.6g}", against=moved))
    return Page(
        title=f"Converted: A, {old.name} ({old.file}), to B, {new.file}",
        holds=None,
        verdict=f"{'exact' if conversion.exact else 'inexact'}: {parts.verdict}",
        lead=parts.lead,
        facts=facts,
        pictures=_pictures(converted, old, new),
        tables=[*parts.tables, constants_table({"A": old, "B": new})],
        origin=origin,
    )


def _pictures(converted: ConvertedCard, old: Card, new: Card) -> list[Picture]:
    first = LawLine(name="A", law=old.shift(), style=FIRST)
    second = LawLine(name="B", law=new.shift(), style=SECOND)
    span, conversion = common_span(old, new), converted.conversion
    if conversion.fitted_range is not None:
        low, high = conversion.fitted_range
        span = replace(span, drawn=(min(low, span.drawn[0]), max(high, span.drawn[1])))
    at = temperature_text(span.common, span.unit)
    figure, axes = small_figure()
    draw_laws(axes, [first, second], span)
    label_lines(figure)
    same = "They lie on each other." if conversion.exact else "Where they part, times differ."
    pictures = [picture(figure, "Both shift laws", f"Both taken as 1 at {at}. {same}")]
    figure, axes = small_figure()
    draw_laws_apart(axes, first, second, span, None if conversion.exact else conversion.largest_error_decades)
    label_lines(figure, 2)
    finding = "Rounding."
    if not conversion.exact:
        finding = f"At most {conversion.largest_error_decades:.3g} decades over the fitted range"
        beyond = converted.service_error
        finding += "." if beyond is None else f", {beyond[0]:.3g} over the service window."
    pictures.append(picture(figure, "Error of the new law", finding))
    figure, axes = small_figure()
    curves = (
        Curve(name="A", material=old.material(), style=FIRST),
        Curve(name="B", material=new.material(), style=SECOND),
    )
    draw_master_curves(axes, curves, old, span.common)
    label_lines(figure, 2)
    finding = f"Shear modulus G and bulk modulus K (with discs) as seen at {at}."
    return [*pictures, picture(figure, "Relaxation moduli", finding)]
