"""`case.toml`: what may stand there, and the sentence for what may not."""

from __future__ import annotations

from pathlib import Path

import pytest

from companion_files import Refusal
from topovet.intake.case_toml import read_settings
from topovet.intake.records import CaseSettings


def settings_of(folder: Path, text: str) -> CaseSettings:
    path = folder / "case.toml"
    path.write_text(text, encoding="utf-8")
    return read_settings(path)


def test_every_key(tmp_path: Path) -> None:
    text = """\
# what the files cannot say
filling = 28
fermi_eV = 6
dimension = 2
inversion_centre = [0, 0.5, -0.25]
surface = [1, -1, 0]
spinless = "../without"
name = "GX-12 α"
"""
    assert settings_of(tmp_path, text) == CaseSettings(
        name="GX-12 α",
        filling=28,
        fermi_ev=6.0,
        dimension=2,
        inversion_centre=(0.0, 0.5, -0.25),
        surface=(1, -1, 0),
        spinless="../without",
    )


def test_silence_is_none(tmp_path: Path) -> None:
    assert settings_of(tmp_path, "# nothing yet\n") == CaseSettings()


KEYS = "one of name, filling, fermi_eV, dimension, inversion_centre, surface, spinless"
CORRECT = "correct it or delete the line"


@pytest.mark.parametrize(
    ("text", "sentence"),
    [
        (
            "filling = 28\nfermi_ev = 6.3\n",
            f'case.toml, line 2: found the key "fermi_ev", expected {KEYS}; write fermi_eV if '
            "that is meant, or delete it.",
        ),
        (
            'fillings = 28\nname = "x"\n',
            f'case.toml, line 1: found the key "fillings", expected {KEYS}; write filling if that '
            "is meant, or delete it.",
        ),
        (
            "\n\n[electrons]\nfilling = 28\n",
            f'case.toml, line 3: found the key "electrons", expected {KEYS}; delete it.',
        ),
        (
            'filling = "28"\n',
            'case.toml, line 1: found filling = "28", expected a whole number of occupied Wannier '
            f"bands, at least 1; {CORRECT}.",
        ),
        (
            "filling = true\n",
            'case.toml, line 1: found filling = "True", expected a whole number of occupied '
            f"Wannier bands, at least 1; {CORRECT}.",
        ),
        (
            "name = 'a'\nfermi_eV = nan\n",
            f'case.toml, line 2: found fermi_eV = "nan", expected a Fermi energy in eV; {CORRECT}.',
        ),
        (
            'spinless = ["a"]\n',
            "case.toml, line 1: found spinless = \"['a']\", expected the path of the same compound "
            f"without spin-orbit coupling, in quotes and printable characters; {CORRECT}.",
        ),
        (
            'spinless = "a\\u0000b"\n',
            'case.toml, line 1: found spinless = "a\\x00b", expected the path of the same compound '
            f"without spin-orbit coupling, in quotes and printable characters; {CORRECT}.",
        ),
        (
            "dimension = 4\n",
            f'case.toml, line 1: found dimension = "4", expected 2 or 3; {CORRECT}.',
        ),
        (
            "surface = [0, 0, 0]\n",
            'case.toml, line 1: found surface = "[0, 0, 0]", expected three whole Miller indices '
            f"up to 20, not all 0, such as [0, 0, 1]; {CORRECT}.",
        ),
        (
            "inversion_centre = [0, 0]\n",
            'case.toml, line 1: found inversion_centre = "[0, 0]", expected three fractional '
            f"coordinates such as [0, 0, 0.5]; {CORRECT}.",
        ),
        (
            "filling = 28\nsurface = (0, 0, 1)\n",
            'case.toml, line 2: found "surface = (0, 0, 1)", which is not TOML, expected each '
            "key once, in lines such as filling = 18; correct the line.",
        ),
        (
            "filling = 1\nfilling = 2\n",
            'case.toml, line 2: found "filling = 2", which is not TOML, expected each key '
            "once, in lines such as filling = 18; correct the line.",
        ),
    ],
)
def test_what_may_not_stand_there(tmp_path: Path, text: str, sentence: str) -> None:
    (tmp_path / "case.toml").write_text(text, encoding="utf-8")
    assert Refusal(tmp_path).of(read_settings, tmp_path / "case.toml") == sentence


@pytest.mark.parametrize(
    "text",
    [
        "filling = 0",
        "filling = -3",
        "filling = 18.0",
        "filling = " + "9" * 5000,
        "filling = 0x" + "f" * 20000,
        "fermi_eV = inf",
        "fermi_eV = true",
        "dimension = 3.0",
        "surface = [0, 0, 1.0]",
        "surface = [0, 0, 99]",
        "inversion_centre = [0, 0, nan]",
        "inversion_centre = 0.5",
        "name = 7",
        "name = '  '",
        'name = "a\\nb"',
        "name = '" + "x" * 201 + "'",
        "filling.up = 3",
        "surface = " + "[" * 5000,
        "\x00\x01\x02",
        "filling",
    ],
)
def test_hostile_values_get_one_short_sentence(tmp_path: Path, text: str) -> None:
    (tmp_path / "case.toml").write_text(text + "\n", encoding="utf-8")
    sentence = Refusal(tmp_path).of(read_settings, tmp_path / "case.toml")
    assert len(sentence) < 400
    assert "\n" not in sentence
