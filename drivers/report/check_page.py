"""The page of checked cards."""

from __future__ import annotations

from collections.abc import Sequence

from drivers.report.axes import FIRST, label_lines, small_figure
from drivers.report.constants import constants_table
from drivers.report.page import Fact, Origin, Page, PageTable, Picture, picture
from drivers.report.shift_plot import LawLine, draw_laws, span_of
from drivers.report.spectrum_plot import decade_text, draw_spectrum, reduced_window
from drivers.report.tables import temperature_text, time_text
from matlib.admissibility import Finding, is_admissible
from matlib.card import Card
from matlib.errors import FileError
from matlib.material import Material

__all__ = ["card_pictures", "check_page", "findings_tables", "spectrum_picture"]

Checked = Sequence[tuple[Card, Sequence[Finding]]]


def check_page(results: Checked, origin: Origin) -> Page:
    """Findings of every card, its terms against its service, and its shift law."""
    bad = [card for card, findings in results if not is_admissible(list(findings))]
    counts = {
        severity: sum(f.severity == severity for _, findings in results for f in findings)
        for severity in ("error", "warning", "note")
    }
    one = results[0][0] if len(results) == 1 else None
    found = ", ".join(f"{n} {name}{'s' if n > 1 else ''}" for name, n in counts.items() if n) or "no findings"
    of = one.name if one is not None else f"{len(results) - len(bad)} of {len(results)} cards are admissible"
    return Page(
        title=f"Checked: {', '.join(f'{card.name} ({card.file})' for card, _ in results)}",
        holds=not bad,
        verdict=f"{of}: {found}",
        lead=["An error makes a card unusable; a warning wants a decision; a note is good to know."],
        facts=[
            Fact(label="Errors", value=str(counts["error"]), against="none allowed"),
            Fact(label="Warnings", value=str(counts["warning"]), against="each wants a decision"),
            *([] if one is None else _service_facts(one)),
        ],
        pictures=[shown for card, _ in results for shown in card_pictures(card, named=one is None)],
        tables=[*findings_tables(results), *(table for card, _ in results for table in _constants(card))],
        origin=origin,
    )


def _service_facts(card: Card) -> list[Fact]:
    facts = []
    if card.service_temperature is not None:
        low, high = (temperature_text(T, card.temperature_unit) for T in card.service_temperature)
        facts.append(Fact(label="Service temperature", value=f"{low} to {high}"))
    if card.service_time is not None:
        short, long = (time_text(t) for t in card.service_time)
        facts.append(Fact(label="Service time", value=f"{short} to {long}"))
    return facts


def findings_tables(results: Checked) -> list[PageTable]:
    """All findings as one table; none where there are none."""
    rows = [[card.file, f.severity, f.id, f.message] for card, findings in results for f in findings]
    if not rows:
        return []
    headers = ["card", "severity", "finding", "what, and what to do"]
    return [PageTable(caption="Findings", headers=headers, rows=rows, wide=[3])]


def material_of(card: Card) -> Material | None:
    """The material of a card, where its constants are one."""
    try:
        return card.material()
    except FileError:
        return None


def _constants(card: Card) -> list[PageTable]:
    """The card's own constants, and every term as a material has it."""
    caption = f"Terms of {card.name} ({card.file})"
    time, stress = card.time_unit, card.stress_unit
    headers = ["modulus", f"relaxation time [{time.name}]", f"modulus [{stress.name}]", "fraction [-]"]
    material = material_of(card)
    rows = []
    for name, series in () if material is None else (("shear", material.shear), ("bulk", material.bulk)):
        share = series.equilibrium / series.instantaneous
        rows.append([f"{name}, long-term", "", f"{stress.from_si(series.equilibrium):.6g}", f"{share:.6g}"])
        for tau, term, share in zip(series.times, series.moduli, series.fractions, strict=True):
            cells = time.from_si(float(tau)), stress.from_si(float(term)), float(share)
            rows.append([name, *(f"{cell:.6g}" for cell in cells)])
    terms = PageTable(caption=caption, headers=headers, rows=rows or [["no material", "", "", ""]], numeric=[1, 2, 3])
    return [constants_table({"value": card}, f"Constants of {card.name} ({card.file})", terms=False), terms]


def card_pictures(card: Card, *, named: bool) -> list[Picture]:
    """The terms of a card against its service, and its shift law; none of a card that is no material."""
    material = material_of(card)
    if material is None:
        return []
    of = f"{card.name}: " if named else ""
    spectrum = spectrum_picture(card, f"{of}Terms against service")
    pictures = [] if spectrum is None else [spectrum]
    figure, axes = small_figure()
    law = material.shift
    draw_laws(axes, [LawLine(name=law.name, law=law, style=FIRST)], span_of(card, law))
    label_lines(figure, 2)
    finding = "The law has no pole."
    if law.pole is not None:
        finding = f"The pole of the law lies at {temperature_text(law.pole, card.temperature_unit)}."
    return [*pictures, picture(figure, f"{of}Shift law", finding)]


def spectrum_picture(card: Card, title: str) -> Picture | None:
    """The terms of a card against its service; None where it is no material."""
    material = material_of(card)
    if material is None:
        return None
    figure, axes = small_figure()
    draw_spectrum(axes, card, material)
    label_lines(figure)
    return picture(figure, title, _reach(card, material))


def _reach(card: Card, material: Material) -> str:
    times = [*material.shear.times.tolist(), *material.bulk.times.tolist()]
    if not times:
        return "An elastic card: it has no relaxing terms."
    reach = f"The terms reach from {min(times):.3g} s to {max(times):.3g} s at T_ref"
    asked = []
    for T in dict.fromkeys(card.service_temperature or ()):
        window = reduced_window(card, material, T)
        if window is not None:
            at = temperature_text(T, card.temperature_unit)
            asked.append(f"{decade_text(window[0])} to {decade_text(window[1])} at {at}")
    return f"{reach}; service asks for {' and '.join(asked)}." if asked else f"{reach}; the card states no service."
