"""`topovet vet`: one case, one dossier."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from topovet.cli.options import LowerGaps, MillerIndices, case_argument
from topovet.cli.progress import progress
from topovet.pipeline.dossier import default_folder, vet_case
from topovet.pipeline.rechecked import recheck_gap
from topovet.pipeline.symmetrised import vet_symmetrised
from topovet.report.json_document import verdict_json
from topovet.report.text import verdict_lines


@click.command("vet")
@case_argument
@click.option("--filling", type=click.IntRange(min=1), help="Occupied Wannier bands, spin counted.")
@click.option("--fermi", "fermi_ev", type=float, metavar="EV", help="Fermi energy in eV, instead.")
@click.option(
    "--out",
    type=click.Path(file_okay=False, path_type=Path),
    metavar="DIR",
    help="Dossier folder [default: NAME-dossier here].",
)
@click.option(
    "--effort",
    type=click.Choice(["quick", "standard", "thorough"]),
    default="standard",
    show_default=True,
    help="How finely the zone is sampled.",
)
@click.option(
    "--surface",
    type=MillerIndices(),
    metavar="h,k,l",
    help="Miller indices of the surface (2D: edge) to follow, in the Hamiltonian's own cell.",
)
@click.option(
    "--lower-gaps",
    type=LowerGaps(),
    metavar="all|N,M,…",
    help="Also the lowest bands up to every open gap below, or up to these numbers of bands.",
)
@click.option(
    "--spinless",
    type=click.Path(path_type=Path),
    metavar="PATH",
    help="The same compound without spin-orbit coupling: scale 0 of its tipping point.",
)
@click.option(
    "--symmetrise",
    "also_symmetrised",
    is_flag=True,
    help="Vet the symmetrised Hamiltonian too, in DIR/symmetrised.",
)
@click.option(
    "--recheck",
    "also_rechecked",
    is_flag=True,
    help="Check the certificate of the proved gap again, by other code than made it.",
)
@click.option("--strict", is_flag=True, help="Exit with 3 when a flag of severity error is raised.")
@click.option("--json", "as_json", is_flag=True, help="Print the verdict as JSON on stdout.")
def command(
    case: str,
    filling: int | None,
    fermi_ev: float | None,
    out: Path | None,
    effort: str,
    surface: tuple[int, int, int] | None,
    lower_gaps: str | list[int] | None,
    spinless: Path | None,
    also_symmetrised: bool,
    also_rechecked: bool,
    strict: bool,
    as_json: bool,
) -> None:
    """Vet CASE, a folder with NAME_hr.dat and its companions, and write its dossier."""
    if filling is not None and fermi_ev is not None:
        raise click.UsageError("give --filling or --fermi, not both")
    folder = default_folder(case) if out is None else out
    settings = {
        "filling": filling,
        "fermi_ev": fermi_ev,
        "effort": effort,
        "surface": None if surface is None else list(surface),
        "lower_gaps": lower_gaps,
        "spinless": None if spinless is None else str(spinless.absolute()),
    }
    with progress(Path(case).name) as observe:
        dossier = vet_case(case, out=folder, settings=settings, observe=observe)
        beside, checked = None, ""
        if also_rechecked:
            checked = recheck_gap(case, out=folder, settings=settings, observe=observe)
        if also_symmetrised:
            where = folder / "symmetrised"
            beside = vet_symmetrised(case, out=where, settings=settings, observe=observe)
    if as_json:
        click.echo(verdict_json(dossier.verdict), nl=False)
    else:
        click.echo(verdict_lines(dossier.verdict))
        if checked:
            click.echo(f"  {'recheck':<10} {checked}")
        click.echo(f"report: {folder / 'report.html'}")
        if beside is not None:
            click.echo(f"\n{beside.sentence}\n{verdict_lines(beside.dossier.verdict)}")
            click.echo(f"report: {folder / 'symmetrised' / 'report.html'}")
    if strict and any(flag.severity == "error" for flag in dossier.verdict.flags):
        sys.exit(3)
