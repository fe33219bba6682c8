"""XYZ files: what is read, what is written, and one sentence for each kind of bad file."""

from __future__ import annotations

from pathlib import Path

import molecule_shapes as shapes
import numpy as np
import pytest

from ribbon.errors import BadInput
from ribbon.study.molecule_file import parse_molecule, read_molecule, xyz_text

ETHYLENE = """6
ethylene, flat
C  0.000  0.000  0.000
C  1.339  0.000  0.000
H -0.560  0.920  0.000
H -0.560 -0.920  0.000
H  1.899  0.920  0.000
H  1.899 -0.920  0.000
"""


def test_ethylene() -> None:
    """Hydrogens are dropped but remembered; lines are those of the file."""
    found = parse_molecule(ETHYLENE)
    assert found.elements.tolist() == ["C", "C"]
    assert found.lines.tolist() == [3, 4]
    assert found.comment == "ethylene, flat"
    np.testing.assert_array_equal(found.positions, [[0, 0, 0], [1.339, 0, 0]])
    assert found.hydrogens.shape == (4, 3)
    assert found.n == 2
    for array in (found.elements, found.positions, found.lines, found.hydrogens):
        assert not array.flags.writeable


@pytest.mark.parametrize(
    "text",
    [
        ETHYLENE.replace("\n", "\r\n"),
        ETHYLENE.rstrip("\n"),
        "\n\n" + ETHYLENE + "\n \n",
        ETHYLENE.replace("C  1.339", "\n\nC  1.339"),
        ETHYLENE.replace("ethylene, flat", ""),
        ETHYLENE.replace("C ", "6 ").replace("H ", "1 "),
        ETHYLENE.replace("C ", "c ").replace("H -", "D -"),
        ETHYLENE.replace("0.000\n", "0.000 0.1 left 7\n"),
        ETHYLENE.replace(" ", "\t"),
        ETHYLENE.replace("1.339", "+.1339E1"),
    ],
    ids=[
        *("windows", "no end", "blank ends", "blank inside", "empty comment"),
        *("numbers", "letters", "more columns", "tabs", "exponent"),
    ],
)
def test_same_atoms_in_other_clothes(text: str) -> None:
    """Line ends, blank lines, atomic numbers, small letters, heavy hydrogen, unnamed columns."""
    found = parse_molecule(text)
    assert found.elements.tolist() == ["C", "C"]
    np.testing.assert_allclose(found.positions[1], [1.339, 0, 0], rtol=0, atol=1e-12)
    assert found.columns == {}


def test_a_mark_of_byte_order_is_no_atom(tmp_path: Path) -> None:
    """As some editors write it."""
    path = tmp_path / "ethylene.xyz"
    path.write_bytes(b"\xef\xbb\xbf" + ETHYLENE.encode())
    assert read_molecule(path).n == 2


def test_named_columns_are_kept() -> None:
    """In the order of the atoms that are kept."""
    text = (
        "3\nwater-like columns=element,x,y,z,spin,charge\n"
        "O 0 0 0 0.5 -0.2\nH 1 0 0 0 0.1\nC 0 1.2 0 0.25 0.3 9\n"
    )
    found = parse_molecule(text)
    assert found.comment == "water-like"
    assert {name: column.tolist() for name, column in found.columns.items()} == {
        "spin": [0.5, 0.25],
        "charge": [-0.2, 0.3],
    }
    assert not found.columns["spin"].flags.writeable


def test_written_and_read_again() -> None:
    """To the last digit, columns included."""
    places, order = shapes.turned(shapes.twisted_belt(9, 1), seed=3)
    charge = order / 7.0
    text = xyz_text(["C"] * 36, places, comment="a  belt\nof nine", columns={"charge": charge})
    found = parse_molecule(text)
    np.testing.assert_array_equal(found.positions, places)
    np.testing.assert_array_equal(found.columns["charge"], charge)
    assert found.comment == "a belt of nine"
    assert parse_molecule(xyz_text(["N"], [[0.0, 0, 0]])).comment == ""


BENT = "3\n\nC 0 0 0\nC 1.4 0 0\nC 1.4 1.4 0\n"

BAD = {
    "empty": ("", "FILE: is empty; expected the number of atoms on the first line"),
    "blank": (" \n\n", "FILE: is empty"),
    "not text": ("3\n\0\1\2", "FILE: is not a text file"),
    "words first": ("benzene\n6\n", 'FILE, line 1: "benzene" must be the number of atoms alone'),
    "no atoms": ("0\n\n", "FILE, line 1: the number of atoms is 0; expected 1 or more"),
    "too many": (
        "3000000\n\n",
        "FILE, line 1: 3,000,000 atoms are more than 200,000, the most a molecule may have here "
        "for its rings to fit the memory",
    ),
    "cut short": (
        BENT.replace("3\n", "7\n", 1),
        "FILE, line 1: 7 atoms are announced, but the file ends after 3; it is cut short",
    ),
    "cut in a line": (BENT[:-6], "FILE, line 5: .* is no atom; expected element x y z"),
    "count only": ("3\n", "FILE, line 1: 3 atoms are announced, but the file ends after 0"),
    "no comment": (
        BENT.replace("\n\n", "\n"),
        "ends after 2; the second line must be a comment, or the count is wrong",
    ),
    "count too low": (
        BENT.replace("3\n", "2\n", 1),
        "FILE, line 5: 2 atoms are announced on line 1, but more lines follow; correct the count",
    ),
    "two structures": (BENT + BENT, "FILE, line 6: .* keep one structure in the file"),
    "no element": (BENT.replace("C 1.4 0", "Q 1.4 0"), 'FILE, line 4: "Q" is no element'),
    "no number": (BENT.replace("C 1.4 0", "0 1.4 0"), 'FILE, line 4: "0" is no element'),
    "wrong element": (
        BENT.replace("C 1.4 0", "Fe 1.4 0"),
        "FILE, line 4: the element Fe has no p orbital known here; B, C, N, O and S are kept, H is",
    ),
    "by number": (BENT.replace("C 1.4 0", "26 1.4 0"), "line 4: the element Fe"),
    "not a number": (
        BENT.replace("1.4 1.4", "1.4 NaN"),
        'FILE, line 5: y = "NaN" must be a finite number',
    ),
    "infinite": (BENT.replace("1.4 1.4", "inf 1.4"), 'FILE, line 5: x = "inf" must be a finite'),
    "huge": (BENT.replace("1.4 1.4", "1e999 1.4"), 'FILE, line 5: x = "1e999" is too large'),
    "far": (BENT.replace("1.4 1.4", "1e9 1.4"), "line 5: a position beyond 1e.06 angstrom"),
    "comma": (
        BENT.replace("1.4 1.4", "1,4 1.4"),
        'FILE, line 5: x = "1,4" must be a finite number; write a decimal point',
    ),
    "underscore": (BENT.replace("1.4 1.4", "1_4 1.4"), 'line 5: x = "1_4" must be a finite number'),
    "same place": (
        BENT.replace("1.4 1.4", "1.4 0.0"),
        "FILE, line 5: atoms on lines 4 and 5 stand at the same place; drop one",
    ),
    "on top": (
        BENT.replace("3\n", "4\n", 1) + "C 1.4 1.7 0\n",
        r"FILE, line 6: atoms on lines 5 and 6 \(C and C\) are 0.3 angstrom apart, on top of each",
    ),
    "hydrogens": ("2\n\nH 0 0 0\nH 0.74 0 0\n", "FILE: holds hydrogens only"),
    "column missing": (
        BENT.replace("3\n\n", "3\ncolumns=element,x,y,z,spin\n"),
        "FILE, line 3: .* is no atom; expected element x y z spin",
    ),
    "column order": (
        BENT.replace("3\n\n", "3\ncolumns=x,y,z,element\n"),
        "FILE, line 2: .* must begin with columns=element,x,y,z",
    ),
    "column twice": (
        BENT.replace("3\n\n", "3\ncolumns=element,x,y,z,a,a\n"),
        "FILE, line 2: .* names a column twice",
    ),
    "column text": (
        BENT.replace("3\n\n", "3\ncolumns=element,x,y,z,a\n").replace("0\n", "0 up\n"),
        'FILE, line 3: a = "up" must be a finite number',
    ),
}


@pytest.mark.parametrize("name", BAD)
def test_bad_files(name: str, tmp_path: Path) -> None:
    """One sentence with file and line."""
    text, sentence = BAD[name]
    path = tmp_path / "bad.xyz"
    path.write_text(text, encoding="utf-8", newline="")
    with pytest.raises(BadInput, match=sentence.replace("FILE", str(path))) as caught:
        read_molecule(path)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("unit", "factor"), [("nanometre", 0.1), ("picometre", 100.0), ("bohr", 1 / 0.529177)]
)
@pytest.mark.parametrize("places", [shapes.polygon(6), shapes.twisted_belt(12, 1)])
def test_units_mistaken(unit: str, factor: float, places: np.ndarray) -> None:
    """The typical distance says which unit would have been right, and the factor."""
    text = xyz_text(["C"] * len(places), places * factor)
    with pytest.raises(BadInput, match=f"fits {unit}s; positions must be in angstrom, so multiply"):
        parse_molecule(text)


def test_files_that_are_none(tmp_path: Path) -> None:
    """Missing, a folder, bytes."""
    with pytest.raises(BadInput, match="there is no such file"):
        read_molecule(tmp_path / "none.xyz")
    with pytest.raises(BadInput, match="this is a folder"):
        read_molecule(tmp_path)
    path = tmp_path / "bytes.xyz"
    path.write_bytes(b"3\n\xff\xfe\n")
    with pytest.raises(BadInput, match="line 2: is not UTF-8 text"):
        read_molecule(path)


@pytest.mark.parametrize(
    ("columns", "sentence"),
    [
        ({"two words": [1.0]}, '"two words" must be one word'),
        ({"x": [1.0]}, '"x" must be one word'),
        ({"spin": [1.0, 2.0]}, r"spin has the shape \(2,\); expected \(1,\)"),
    ],
)
def test_columns_that_cannot_be_written(columns: dict[str, list[float]], sentence: str) -> None:
    """Names that the reader would not find again, and wrong lengths."""
    with pytest.raises(BadInput, match=sentence):
        xyz_text(["C"], [[0.0, 0, 0]], columns=columns)


def test_positions_that_cannot_be_written() -> None:
    """One row for each element."""
    with pytest.raises(BadInput, match=r"shape \(1, 3\); expected \(2, 3\)"):
        xyz_text(["C", "C"], [[0.0, 0, 0]])
