"""Cautions for whoever may make or handle the compound, by element.

General knowledge from memory, worded after the harmonised classifications of the European CLP
regulation (its form of GHS): a prompt to look things up, neither complete nor a risk assessment.
"""

from __future__ import annotations

from collections.abc import Iterable

_BY_ELEMENT = {
    "Be": "Be and most of its compounds: may cause cancer when inhaled (category 1B), fatal when "
    "inhaled, toxic when swallowed, damage the lungs; the dust sensitises",
    "F": "F: many fluorides are toxic, and with acids they release hydrogen fluoride, which "
    "burns deeply and is toxic through the skin",
    "P": "P: phosphides can release phosphine, a highly toxic and flammable gas, with moisture "
    "or acids",
    "S": "S: sulfides can release hydrogen sulfide, a toxic and flammable gas, with acids or "
    "moisture",
    "V": "V compounds: several oxides harm the lungs and are suspected or presumed to cause "
    "cancer or genetic defects",
    "Cr": "Cr: hexavalent compounds cause cancer when inhaled (category 1A or 1B) and sensitise "
    "skin; check the oxidation state",
    "Co": "Co and many of its compounds: presumed to cause cancer (category 1B), sensitise skin "
    "and airways",
    "Ni": "Ni compounds: many cause cancer when inhaled (category 1A); Ni sensitises skin",
    "As": "As and its compounds: toxic when swallowed or inhaled; several cause cancer "
    "(category 1A or 1B); with acids or moisture arsenides can release arsine, a very toxic gas",
    "Se": "Se and its compounds: toxic when swallowed or inhaled, damage organs on repeated "
    "exposure; with acids or moisture selenides can release hydrogen selenide, a very toxic gas",
    "Cd": "Cd and its compounds: toxic, many may cause cancer (category 1B), damage kidneys and "
    "bones on repeated exposure; fumes can be fatal",
    "In": "In compounds: fine dust damages the lungs; indium phosphide is classified as presumed "
    "to cause cancer (category 1B)",
    "Sb": "Sb compounds: harmful when swallowed or inhaled; the trioxide is suspected to cause "
    "cancer (category 2)",
    "Te": "Te and its compounds: the element and the dioxide are classified as presumed to harm "
    "reproduction (category 1B); with acids or moisture tellurides can release hydrogen "
    "telluride, a very toxic gas",
    "Ba": "Ba: compounds that dissolve in water or in stomach acid are harmful when swallowed or "
    "inhaled",
    "Os": "Os: oxidises to the volatile tetroxide, which is fatal when inhaled and burns eyes "
    "and airways",
    "Hg": "Hg and its compounds: fatal or toxic by every route, damage nerves and kidneys on "
    "repeated exposure; vapour at room temperature",
    "Tl": "Tl and its compounds: fatal when swallowed or inhaled, damage organs on repeated "
    "exposure; act through the skin as well",
    "Pb": "Pb and its compounds: harm the unborn child and fertility (category 1A), damage nerves "
    "and blood on repeated exposure",
    "U": "U and its compounds: fatal when swallowed or inhaled, damage organs on repeated "
    "exposure; radioactive, so licences and radiation protection apply",
    "Th": "Th and its compounds: radioactive, so licences and radiation protection apply; may "
    "cause cancer",
}

_IGNITING = ("Li", "Na", "K", "Rb", "Cs")
"""Alkali metals: the element itself is a starting material of most syntheses."""

_RADIOACTIVE = (
    *("Tc", "Pm", "Po", "At", "Rn", "Fr", "Ra", "Ac", "Pa"),
    *("Np", "Pu", "Am", "Cm", "Bk", "Cf", "Es", "Fm", "Md", "No", "Lr"),
)
"""Elements without a stable or nearly stable isotope, besides Th and U."""

DEFERENCE = (
    "General knowledge from memory, worded after the harmonised GHS/CLP classifications; neither "
    "complete nor a risk assessment. Read the safety data sheets, follow local rules, and let "
    "trained people decide how anything is made, handled and disposed of."
)


def handling_cautions(symbols: Iterable[str]) -> tuple[str, ...]:
    """Cautions for the elements of a compound, in order of first appearance.

    Parameters
    ----------
    symbols
        Chemical symbols; repeats are ignored.

    Returns
    -------
    tuple of str
        One sentence per element on the list, then `DEFERENCE`; empty where none is on it, which
        is not a clearance.
    """
    found = [caution for symbol in dict.fromkeys(symbols) for caution in _of_element(symbol)]
    return (*found, DEFERENCE) if found else ()


def _of_element(symbol: str) -> tuple[str, ...]:
    if symbol in _BY_ELEMENT:
        return (_BY_ELEMENT[symbol] + ".",)
    if symbol in _IGNITING:
        return (
            f"{symbol}: the metal, as a starting material, reacts violently with water and can "
            "catch fire in air.",
        )
    if symbol in _RADIOACTIVE:
        return (
            f"{symbol}: no stable isotope; radioactive, so licences and radiation "
            "protection apply before anything else.",
        )
    return ()
