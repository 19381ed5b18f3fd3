"""The walk as one HTML file: opens offline, runs nothing, prints; the look of the dossier."""

from __future__ import annotations

from topovet.deformation.conclusion import index_text, side_text
from topovet.notation import z2_text
from topovet.report.deformation.material import DeformationMaterial
from topovet.report.deformation.text import (
    averaged_text,
    closing_text,
    compared_text,
    proof_text,
)
from topovet.report.figures.canvas import FONTS
from topovet.report.html import page_colours, page_environment
from topovet.report.svg import inline_svg

TITLES = {
    "stays-open": "One phase: the gap stays open",
    "closes": "A transition lies between",
    "gapless-interval": "A gapless range lies between",
    "undetermined": "Undetermined",
}


def render_deformation(material: DeformationMaterial, figure: str) -> str:
    """The page as HTML text, the same for the same material.

    Parameters
    ----------
    material
        What to show.
    figure
        SVG text from `topovet.report.figures.deformation.deformation_figure`.
    """
    conclusion = material.conclusion
    title = TITLES[conclusion.outcome]
    if conclusion.outcome == "stays-open" and not material.walk.proved_throughout:
        title = "No closing was met"
    elif conclusion.outcome == "closes" and conclusion.changes == ():
        title = "The gap closes, no index changes"
    return (
        page_environment()
        .get_template("deform.html.j2")
        .render(
            m=material,
            w=material.walk,
            c=conclusion,
            title=title,
            indices=[_index_of_end(material, letter) for letter in ("A", "B")],
            figure=inline_svg("deform", figure),
            side_text=side_text,
            closing_text=closing_text,
            rows=(
                ("Compared", compared_text(material.walk)),
                ("Averaged", averaged_text(material.walk)),
                ("Proof", proof_text(material.walk)),
            ),
            colours=page_colours(),
            fonts=FONTS,
        )
    )


def _index_of_end(material: DeformationMaterial, letter: str) -> tuple[str, str]:
    """Name and value of the index of an end: Z2 of its verdict, else the Chern number."""
    end, lam = (material.a, 0.0) if letter == "A" else (material.b, 1.0)
    if end.z2 is None:
        for segment in material.walk.segments:
            for side in segment.sides:
                if side.lam == lam and side.chern is not None:
                    return f"Chern number of {letter}", index_text("chern", side.chern)[4:]
    return f"Z₂ of {letter}", z2_text(end.z2)
