import hashlib
from pathlib import Path

import numpy as np
import pytest

from optics.device.errors import CaseError, Fault, nearest
from optics.device.tables import read_curve, read_index_table


def written(folder: Path, text: str | bytes) -> Path:
    path = folder / "t.csv"
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    return path


def fault_lines(folder: Path, error: CaseError) -> list[str]:
    return [line.replace(f"{folder}/", "") for line in str(error).splitlines()]


def test_reads_commas_header_and_hash(tmp_path: Path) -> None:
    remarks = "# source: A. Author, J. Test 1, 2 (3)\n# a remark\n"
    text = remarks + "wavelength_nm,n,k\n400,1.5,0\n500,1.6,0.1\n"
    table = read_index_table(written(tmp_path, text))
    assert table.wavelength_nm.tolist() == [400, 500]
    assert table.n.tolist() == [1.5, 1.6]
    assert table.k.tolist() == [0, 0.1]
    assert table.header == {"source": "A. Author, J. Test 1, 2 (3)"}
    assert table.sha256 == hashlib.sha256(text.encode()).hexdigest()
    assert not table.n.flags.writeable


def test_reads_blanks_micrometers_descending_without_k(tmp_path: Path) -> None:
    table = read_index_table(
        written(tmp_path, "\ufeffwavelength_um\tn\r\n0.5  1.6\r\n\r\n0.4 1.5\r\n")
    )
    np.testing.assert_allclose(table.wavelength_nm, [400, 500], rtol=1e-15)
    assert table.n.tolist() == [1.5, 1.6]
    assert table.k.tolist() == [0, 0]


def test_reads_energy_and_permittivity(tmp_path: Path) -> None:
    table = read_index_table(written(tmp_path, "energy_eV,eps1,eps2\n2,-10,-0.0\n2.5,3,4\n"))
    np.testing.assert_allclose(table.wavelength_nm, [1239.841984 / 2.5, 1239.841984 / 2])
    # (2 + i)² = 3 + 4i; a lossless metal has n = 0, k > 0 whatever the sign of its zero.
    np.testing.assert_allclose(table.n, [2, 0], atol=1e-15)
    np.testing.assert_allclose(table.k, [1, np.sqrt(10)])


N_ROW = "400,1.5,0\n500,1.6,0\n"
INDEX_FAULTS = {
    "text cell": (
        "wavelength_nm,n,k\n400,1.5,0\n500,one,0\n",
        ["t.csv: line 3, column n: found 'one'; expected a finite number"],
    ),
    "empty cell": (
        "wavelength_nm,n,k\n400,1.5,\n500,1.5,0\n",
        ["t.csv: line 2, column k: found an empty cell; expected a finite number"],
    ),
    "not finite": (
        "# x: y\nwavelength_nm,n,k\n400,inf,0\n500,1.5,nan\n",
        [
            "t.csv: line 3, column n: found 'inf'; expected a finite number",
            "t.csv: line 4, column k: found 'nan'; expected a finite number",
        ],
    ),
    "negative": (
        "wavelength_nm,n,k\n-400,1.5,-0.1\n500,-1.5,0\n",
        [
            "t.csv: line 2, column wavelength_nm: found -400; expected more than 0",
            "t.csv: line 2, column k: found -0.1; expected 0 or more",
            "t.csv: line 3, column n: found -1.5; expected 0 or more",
        ],
    ),
    "repeated and misplaced": (
        "wavelength_nm,n\n400,1.5\n400,1.5\n450,1.5\n440,1.5\n500,1.5\n",
        [
            "t.csv: line 3, column wavelength_nm: found 400 a second time; "
            "expected every value once",
            "t.csv: line 5, column wavelength_nm: found 440 after 450; expected ascending values",
        ],
    ),
    "misplaced in descending": (
        "wavelength_nm,n\n500,1.5\n450,1.5\n460,1.5\n400,1.5\n",
        ["t.csv: line 4, column wavelength_nm: found 460 after 450; expected descending values"],
    ),
    "ragged": (
        "wavelength_nm,n,k\n400,1.5,0,7\n500,1.6\n600,1.6,0\n700,1.6,0\n",
        [
            "t.csv: line 2: found 4 values; expected 3, one per column",
            "t.csv: line 3: found 2 values; expected 3, one per column",
        ],
    ),
    "unknown and missing columns": (
        "wavelength,n,k,T\n400,1.5,0,300\n500,1.6,0,300\n",
        [
            "t.csv: line 1: found columns wavelength, n, k, T; "
            "expected a column wavelength_nm or wavelength_um or energy_eV",
            "t.csv: line 1: found column 'wavelength'; expected only columns among "
            "wavelength_nm, wavelength_um, energy_eV, n, k, eps1, eps2 "
            "(did you mean wavelength_nm?)",
            "t.csv: line 1: found column 'T'; expected only columns among "
            "wavelength_nm, wavelength_um, energy_eV, n, k, eps1, eps2",
        ],
    ),
    "two coordinates": (
        "wavelength_nm,energy_eV,n\n400,3,1.5\n500,2,1.6\n",
        [
            "t.csv: line 1: found columns wavelength_nm and energy_eV; "
            "expected one of wavelength_nm or wavelength_um or energy_eV only"
        ],
    ),
    "two kinds of value": (
        "wavelength_nm,n,eps1,eps2\n400,1,1,0\n500,1,1,0\n",
        ["t.csv: line 1: found columns n, eps1, eps2; expected n, or n and k, or eps1 and eps2"],
    ),
    "half a permittivity": (
        "wavelength_nm,eps1\n400,1\n500,1\n",
        ["t.csv: line 1: found columns eps1; expected n, or n and k, or eps1 and eps2"],
    ),
    "column twice": (
        "wavelength_nm,n,n\n400,1,2\n500,1,2\n",
        ["t.csv: line 1: found column 'n' 2 times; expected every column once"],
    ),
    "gain": (
        "wavelength_nm,eps1,eps2\n400,1,-0.1\n500,-1,0\n",
        ["t.csv: line 2, column eps2: found -0.1; expected 0 or more"],
    ),
    "no permittivity": (
        "wavelength_nm,n,k\n400,0,0\n500,0,3\n",
        ["t.csv: line 2, column n and k: found 0; expected a value that is not 0"],
    ),
    "one row": (
        "wavelength_nm,n\n400,1.5\n",
        ["t.csv: found 1 row of numbers; expected 2 rows or more"],
    ),
    "names only": (
        "wavelength_nm,n\n",
        ["t.csv: found no row of numbers; expected 2 rows or more"],
    ),
    "no names": (
        N_ROW,
        ["t.csv: line 1: found numbers; expected a line of column names, not marked as a remark"],
    ),
    "semicolons": (
        "wavelength_nm;n\n400;1,5\n",
        ["t.csv: line 1: found semicolons; expected columns parted by commas or blanks"],
    ),
    "empty": ("", ["t.csv: found an empty file; expected a table with a line of column names"]),
    "remarks": (
        "# a: b\n",
        ["t.csv: found remarks only; expected a table with a line of column names"],
    ),
    "encoding": (
        b"wavelength_nm,n\n400,1.5\n# \xb5m\n",
        ["t.csv: line 3: found byte 0xb5, which is not UTF-8; expected text in UTF-8"],
    ),
}


@pytest.mark.parametrize("name", INDEX_FAULTS)
def test_every_fault_of_an_index_table_is_listed(tmp_path: Path, name: str) -> None:
    text, expected = INDEX_FAULTS[name]
    with pytest.raises(CaseError) as caught:
        read_index_table(written(tmp_path, text))
    assert fault_lines(tmp_path, caught.value) == expected


def test_missing_file_and_folder(tmp_path: Path) -> None:
    with pytest.raises(CaseError, match=r"none\.csv: found no such file; expected a table"):
        read_index_table(tmp_path / "none.csv")
    with pytest.raises(CaseError, match="found a folder; expected a table"):
        read_index_table(tmp_path)


def test_curve_reads_either_coordinate(tmp_path: Path) -> None:
    choices = ("position", "position_nm")
    path = written(tmp_path, "density position_nm\n1 20\n3 0\n")
    curve = read_curve(path, "density", coordinate=choices)
    assert (curve.coordinate, curve.x.tolist(), curve.y.tolist()) == (
        "position_nm",
        [0, 20],
        [3, 1],
    )


def test_curve_faults(tmp_path: Path) -> None:
    path = written(tmp_path, "# quantity: photons\nwavelength_nm,valu\n0,1\n500,-2\n")
    with pytest.raises(CaseError) as caught:
        read_curve(path, "value")
    assert fault_lines(tmp_path, caught.value) == [
        "t.csv: line 2: found columns wavelength_nm, valu; expected a column value",
        "t.csv: line 2: found column 'valu'; expected only columns among wavelength_nm, value "
        "(did you mean value?)",
        "t.csv: line 3, column wavelength_nm: found 0; expected more than 0",
    ]
    path = written(tmp_path, "wavelength_nm,value\n400,1\n500,-2\n")
    with pytest.raises(CaseError, match=r"line 3, column value: found -2; expected 0 or more"):
        read_curve(path, "value")


def test_fault_line_and_nearest_name() -> None:
    fault = Fault("a.toml", "layers.ETL", "'sio'", "a material", nearest("SIO", ["sio2", "ag"]))
    assert str(fault) == "a.toml: layers.ETL: found 'sio'; expected a material (did you mean sio2?)"
    assert nearest("zzz", ["sio2", "ag"]) is None
