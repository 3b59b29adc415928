"""Every planted fault of a case file is reported, with its exact line."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from case_examples import changed, full_document, plain_document

from optics.device.case import case_from_dict, read_case
from optics.device.errors import CaseError

KINDS = (
    "exactly one kind of material: n, table, n_ordinary with n_extraordinary, ordinary with "
    "extraordinary, cauchy_nm, sellmeier, lorentz_drude or mix"
)


def faults_of(document: dict[str, Any], folder: Path | str = ".") -> list[str]:
    with pytest.raises(CaseError) as error:
        case_from_dict(document, folder, "my.toml")
    return str(error.value).splitlines()


# path of the change, new value (None removes), the one line that has to come of it
ONE_FAULT: list[tuple[str, Any, str]] = [
    ("title", None, "title: found nothing; expected a title in quotes"),
    ("title", 5, "title: found 5; expected text in quotes"),
    (
        "wavelenght",
        {"values_nm": [500]},
        "wavelenght: found unknown key with a table with values_nm; expected one of title, "
        "wavelength, materials, substrate, cover, surroundings, sides, layers, emitters, drive, "
        "sweep, optimize, tolerance (did you mean wavelength?)",
    ),
    # wavelengths
    (
        "wavelength/step_nm",
        7,
        "wavelength.step_nm: found 7; expected a step that divides the range of 250 nm into whole "
        "steps",
    ),
    (
        "wavelength/stop_nm",
        450,
        "wavelength.stop_nm: found 450; expected a wavelength above start_nm = 450; a single one "
        "goes into values_nm",
    ),
    ("wavelength/step_nm", 0, "wavelength.step_nm: found 0; expected a number above 0"),
    (
        "wavelength/step_nm",
        1e-5,
        "wavelength.step_nm: found 1e-05; expected at most 1000000 wavelengths",
    ),
    (
        "wavelength",
        {"values_nm": [500, 520, 520]},
        "wavelength.values_nm[2]: found 520 after 520; expected ascending wavelengths",
    ),
    (
        "wavelength",
        {"values_nm": [-5, 520]},
        "wavelength.values_nm[0]: found -5; expected a number above 0",
    ),
    (
        "wavelength",
        {"values_nm": []},
        "wavelength.values_nm: found a list of 0; expected at least 1",
    ),
    (
        "wavelength/values_nm",
        [500],
        "wavelength: found a table with start_nm, stop_nm, step_nm, values_nm; expected either "
        "start_nm, stop_nm and step_nm, or values_nm",
    ),
    # materials
    ("materials/htl-a/n", -1.5, "materials.htl-a.n: found -1.5; expected a number of at least 0"),
    ("materials/htl-a/n", True, "materials.htl-a.n: found true; expected a number"),
    ("materials/htl-a/n", "1.8", 'materials.htl-a.n: found "1.8"; expected a number'),
    (
        "materials/htl-a/n",
        float("nan"),
        "materials.htl-a.n: found nan; expected a finite number",
    ),
    (
        "materials/htl-a/n",
        float("inf"),
        "materials.htl-a.n: found inf; expected a finite number",
    ),
    ("materials/htl-a/k", -0.1, "materials.htl-a.k: found -0.1; expected a number of at least 0"),
    (
        "materials/htl-a/n",
        0,
        "materials.htl-a.n: found 0 with k = 0; expected a refractive index that is not zero "
        "altogether",
    ),
    (
        "materials/htl-a",
        {"n": 1.8, "table": "x.csv"},
        f"materials.htl-a: found a table with n, table; expected {KINDS}",
    ),
    ("materials/htl-a", {"k": 0.1}, f"materials.htl-a: found a table with k; expected {KINDS}"),
    (
        "materials/htl-a",
        {"cauhcy_nm": [1.7, 9e3]},
        f"materials.htl-a: found a table with cauhcy_nm; expected {KINDS} "
        "(did you mean cauchy_nm?)",
    ),
    (
        "materials/bad name",
        {"n": 1.5},
        'materials.bad name: found the name "bad name"; expected letters, digits, _ and - only',
    ),
    (
        "materials/htl-c/cauchy_nm",
        [1.7],
        "materials.htl-c.cauchy_nm: found a list of 1; expected at least 2",
    ),
    (
        "materials/silica/sellmeier/c_um2",
        [0.004, 0.01],
        "materials.silica.sellmeier: found 1 values of b and 2 of c_um2; expected as many of one "
        "as of the other, at least one",
    ),
    (
        "materials/doped/mix/htl-a",
        0.9,
        "materials.doped.mix: found fractions that sum to 0.98; expected a sum of 1",
    ),
    (
        "materials/doped/rule",
        "brugeman",
        'materials.doped.rule: found "brugeman"; expected one of "bruggeman", "linear" '
        "(did you mean bruggeman?)",
    ),
    (
        "materials/doped/mix",
        {"host": 0.5, "htl-a": 0.5},
        "materials.doped.mix.host: found host, which is birefringent; expected an isotropic "
        "material",
    ),
    (
        "materials/doped/mix",
        {"doped": 1.0},
        "materials.doped.mix.doped: found the cycle doped → doped; expected materials that do not "
        "contain themselves",
    ),
    (
        "materials/loop",
        {"ordinary": "loop", "extraordinary": "air"},
        "materials.loop.ordinary: found the cycle loop → loop; expected materials that do not "
        "contain themselves",
    ),
    (
        "materials/lost",
        {"table": "no.csv"},
        'materials.lost.table: found "no.csv", no such file; expected the path of a table, '
        "relative to the case file",
    ),
    # slabs, surroundings, sides
    (
        "substrate/exit",
        "plane",
        'substrate.exit: found "plane"; expected one of "planar", "matched" (did you mean planar?)',
    ),
    (
        "substrate/material",
        "host",
        'substrate.material: found "host", which is birefringent; expected an isotropic material',
    ),
    (
        "substrate/thickness_mm",
        0,
        "substrate.thickness_mm: found 0; expected a number above 0",
    ),
    (
        "surroundings",
        {"top": "host"},
        'surroundings.top: found "host", which is birefringent; expected an isotropic material',
    ),
    (
        "surroundings",
        {"bottom": "metal"},
        'surroundings.bottom: found "metal", which absorbs, behind a slab; expected transparent '
        "surroundings, or no [substrate] between",
    ),
    (
        "sides",
        {"bottom": {"polarizer_transmittance": 1.2}},
        "sides.bottom.polarizer_transmittance: found 1.2; expected a number from 0 to 1",
    ),
    # layers
    ("layers", None, "layers: found nothing; expected at least one [[layers]]"),
    ("emitters", [], "emitters: found a list of 0; expected at least 1"),
    (
        "layers/3/thickness_nm",
        None,
        "layers.ETL.thickness_nm: found nothing; expected thickness in nm, at least 0",
    ),
    (
        "layers/3/thickness_nm",
        -2,
        "layers.ETL.thickness_nm: found -2; expected a number of at least 0",
    ),
    (
        "layers/2/thickness_nm",
        0,
        "layers.EML.thickness_nm: found 0; expected above 0 nm, since green emits in this layer",
    ),
    (
        "layers/3/name",
        "HTL",
        'layers[3].name: found "HTL" again, already the name of layers[1]; expected a name of its '
        "own",
    ),
    (
        "layers/3/name",
        "E T L",
        'layers.E T L.name: found "E T L"; expected letters, digits, _ and - only',
    ),
    (
        "layers/3/material",
        "htl-aa",
        'layers.ETL.material: found "htl-aa", no such material; expected a material of '
        "[materials] or of the catalogue (did you mean htl-a?)",
    ),
    # emitters
    (
        "emitters/0/layer",
        "EMLL",
        'emitters.green.layer: found "EMLL", no such layer; expected the name of a layer: ITO, '
        "HTL, EML, ETL, CAT (did you mean EML?)",
    ),
    (
        "emitters/0/layer",
        "CAT",
        'emitters.green.layer: found "CAT" of metal, a metal at 450 nm; expected a layer whose '
        "permittivity has a real part above 0",
    ),
    (
        "emitters/0/horizontal_fraction",
        1.2,
        "emitters.green.horizontal_fraction: found 1.2; expected a number from 0 to 1",
    ),
    (
        "emitters/0/order_parameter",
        0.1,
        "emitters.green.order_parameter: found 0.1 beside horizontal_fraction; expected one of "
        "horizontal_fraction, vertical_fraction, order_parameter",
    ),
    (
        "emitters/0/quantum_yield",
        1.01,
        "emitters.green.quantum_yield: found 1.01; expected a number from 0 to 1",
    ),
    (
        "emitters/0/share",
        0.5,
        "emitters: found shares 0.5 = 0.5 in unit device (green); expected shares that sum to 1 "
        "within each unit",
    ),
    (
        "emitters/0/spectrum",
        {"peak_nm": 524, "fwhm_nm": 58, "line_nm": 520},
        "emitters.green.spectrum: found a table with peak_nm, fwhm_nm, line_nm; expected exactly "
        "one of: peak_nm with fwhm_nm, line_nm, table with quantity",
    ),
    (
        "emitters/0/spectrum",
        {"table": "f.csv"},
        'emitters.green.spectrum.quantity: found nothing; expected "photons" or "power", per nm',
    ),
    (
        "emitters/0/zone",
        {"shape": "unifrom"},
        'emitters.green.zone.shape: found "unifrom"; expected one of uniform, point, exponential, '
        "gaussian, table (did you mean uniform?)",
    ),
    (
        "emitters/0/zone",
        {"at": 0.5},
        "emitters.green.zone.shape: found nothing; expected one of uniform, point, exponential, "
        "gaussian, table",
    ),
    (
        "emitters/0/zone",
        {"shape": "point", "at": 1.2},
        "emitters.green.zone.at: found 1.2; expected a number from 0 to 1",
    ),
    (
        "emitters/0/zone",
        {"shape": "point"},
        "emitters.green.zone: found neither at nor at_nm; expected either at, or at_nm with from",
    ),
    (
        "emitters/0/zone",
        {"shape": "point", "at_nm": 3},
        "emitters.green.zone: found at_nm without from; expected either at, or at_nm with from",
    ),
    (
        "emitters/0/zone",
        {"shape": "point", "at_nm": 24.5, "from": "top"},
        "emitters.green.zone.at_nm: found 24.5; expected a position inside its film, 0 to 24",
    ),
    (
        "emitters/0/zone",
        {"shape": "exponential", "from": "left", "decay_nm": 5},
        'emitters.green.zone.from: found "left"; expected one of "top", "bottom"',
    ),
    (
        "emitters/0/zone",
        {"shape": "gaussian", "at": 0.5, "width_nm": 0},
        "emitters.green.zone.width_nm: found 0; expected a number above 0",
    ),
    # drive
    (
        "drive/charge_balance",
        {"upper": 1.0, "device": 0.9},
        'drive.charge_balance.upper: found a value for "upper", no such unit; expected a unit of '
        "the emitters: device",
    ),
    (
        "drive/charge_balance",
        {},
        "drive.charge_balance.device: found nothing; expected a charge balance for every unit",
    ),
    ("drive/duty", 0, "drive.duty: found 0; expected a number above 0 and of at most 1"),
    (
        "drive/current_density_mA_cm2",
        -1,
        "drive.current_density_mA_cm2: found -1; expected a number above 0",
    ),
    (
        "drive/voltage_v",
        5,
        "drive.voltage_v: found unknown key with 5; expected one of charge_balance, "
        "current_density_mA_cm2, voltage_V, aperture_ratio, duty (did you mean voltage_V?)",
    ),
]


@pytest.mark.parametrize(("path", "value", "line"), ONE_FAULT)
def test_one_planted_fault_gives_one_line(path: str, value: Any, line: str, tmp_path: Path) -> None:
    assert faults_of(changed(path, value), tmp_path) == [f"my.toml: {line}"]


STUDY_FAULTS: list[tuple[str, Any, str]] = [
    (
        "sweep/axes",
        {"layers.HTL.thickness": {"values": [1]}},
        'sweep.axes."layers.HTL.thickness": found "layers.HTL.thickness", no such address; '
        "expected the address of a value, such as layers.NAME.thickness_nm (did you mean "
        "layers.HTL.thickness_nm?)",
    ),
    (
        "sweep/axes",
        {"layers.HTL.material": {"values": [1]}},
        'sweep.axes."layers.HTL.material": found "layers.HTL.material", "doped"; expected the '
        "address of a number",
    ),
    (
        "sweep/axes",
        {"layers.HTL.thickness_nm": {"start": 20, "stop": 120, "step": 3}},
        'sweep.axes."layers.HTL.thickness_nm".step: found 3; expected a step that divides 100',
    ),
    (
        "sweep/axes",
        {"layers.HTL.thickness_nm": {"start": 20, "stop": 120}},
        'sweep.axes."layers.HTL.thickness_nm": found start, stop; expected either start, stop and '
        "step, or values",
    ),
    (
        "sweep/axes",
        {"layers.HTL.thickness_nm": {"values": [1], "strt": 1}},
        'sweep.axes."layers.HTL.thickness_nm".strt: found unknown key with 1; expected one of '
        "start, stop, step, values (did you mean start?)",
    ),
    (
        "sweep/axes",
        {
            "emitters.green.horizontal_fraction": {"values": [0.5]},
            "emitters.green.order_parameter": {"values": [0.5]},
        },
        'sweep.axes."emitters.green.order_parameter": found "emitters.green.order_parameter" '
        'beside "emitters.green.horizontal_fraction"; expected one orientation number of an '
        "emitter in one study",
    ),
    (
        "optimize/minimize",
        "destinations.guided",
        "optimize: found maximize and minimize; expected exactly one of maximize, minimize, "
        "objectives",
    ),
    (
        "optimize/variables/layers.HTL.thickness_nm/max",
        20,
        'optimize.variables."layers.HTL.thickness_nm".max: found 20; expected above min = 20',
    ),
    (
        "optimize/constraints/bottom.delta_uv_60",
        {},
        'optimize.constraints."bottom.delta_uv_60": found nothing; expected min, max or both',
    ),
    (
        "tolerance/spread/layers.ETL.thickness_nm/sd",
        1,
        'tolerance.spread."layers.ETL.thickness_nm": found sd and half_width; expected exactly one '
        "of relative_sd, sd, half_width",
    ),
    (
        "tolerance/groups/0/paths/1",
        "layers.ITO.thickness_nm",
        'tolerance.groups[0].paths[1]: found "layers.ITO.thickness_nm" without spread; expected a '
        "path of tolerance.spread",
    ),
    (
        "tolerance/groups/0/correlation",
        1.5,
        "tolerance.groups[0].correlation: found 1.5; expected a number from -1 to 1",
    ),
    ("tolerance/samples", 10.5, "tolerance.samples: found 10.5; expected a whole number"),
]


@pytest.mark.parametrize(("path", "value", "line"), STUDY_FAULTS)
def test_one_planted_fault_in_a_study_gives_one_line(path: str, value: Any, line: str) -> None:
    assert faults_of(changed(path, value, full_document())) == [f"my.toml: {line}"]


def test_many_faults_come_out_together() -> None:
    document = full_document()
    document["titel"] = "typo"
    document["layers"][0]["thickness_nm"] = -1
    document["layers"][0]["material"] = "htl-x"
    document["layers"][3]["material"] = "htl-y"
    document["emitters"][0] |= {"horizontal_fraction": 1.2, "layer": "EMLX"}
    document["wavelength"]["step_nm"] = 7
    document["materials"]["doped"]["mix"] = {"htl-a": 0.5, "htl-z": 0.4}
    document["drive"]["charge_balance"] = {"upper": 2}
    document["sweep"]["axes"]["layers.HTL.thickness_nm"] = {"start": 1}
    keys = [line.split(": ")[1] for line in faults_of(document)]
    assert sorted(keys) == [
        "drive.charge_balance.upper",
        "emitters.green.horizontal_fraction",
        "emitters.green.layer",
        "layers.ETL.material",
        "layers.ITO.material",
        "layers.ITO.thickness_nm",
        "materials.doped.mix",
        "materials.doped.mix.htl-z",
        'sweep.axes."layers.HTL.thickness_nm"',
        "titel",
        "wavelength.step_nm",
    ]


def test_absorbing_surroundings_on_both_sides() -> None:
    document = changed("surroundings", {"bottom": "metal", "top": "metal"})
    del document["substrate"]
    assert faults_of(document) == [
        "my.toml: surroundings: found absorbing media on both sides; expected absorbing "
        "surroundings on one side"
    ]
    document["surroundings"]["bottom"] = "air"
    case_from_dict(document)


def test_birefringent_host_that_is_a_metal_along_the_normal_only() -> None:
    host = {"n_ordinary": 1.8, "n_extraordinary": 0.3, "k_extraordinary": 2.0}
    assert faults_of(changed("materials/host", host)) == [
        'my.toml: emitters.green.layer: found "EML" of host, a metal at 450 nm; expected a layer '
        "whose extraordinary permittivity has a real part above 0"
    ]


def test_zone_that_closest_approach_leaves_empty() -> None:
    document = plain_document()
    document["layers"][2]["thickness_nm"] = 0.9
    document["layers"][1]["material"] = document["layers"][3]["material"] = "metal"
    assert faults_of(document) == [
        "my.toml: emitters.green.zone: found nothing left of it beyond closest_approach_nm = 0.5 "
        "from the absorbers around; expected a zone with a part farther away in its film of 0.9 nm"
    ]
    document["layers"][2]["thickness_nm"] = 1.1
    case_from_dict(document)


@pytest.mark.parametrize("at", [0.0, 1.0])
def test_point_on_the_face_of_an_absorber(at: float) -> None:
    document = changed("emitters/0/zone", {"shape": "point", "at": at})
    document["layers"][1]["material"] = document["layers"][3]["material"] = "metal"
    assert faults_of(document) == [
        "my.toml: emitters.green.zone: found a point on the face of an absorber; expected a point "
        "at some distance from it"
    ]


def test_point_nearer_than_the_closest_approach_is_a_warning() -> None:
    document = changed("emitters/0/zone", {"shape": "point", "at_nm": 0.2, "from": "top"})
    assert case_from_dict(document).warnings == ()
    document["layers"][3]["material"] = "metal"
    assert case_from_dict(document).warnings == (
        "emitters.green: the point lies 0.2 nm from an absorber, nearer than "
        "closest_approach_nm = 0.5",
    )


def test_no_closest_approach_at_an_absorber_is_a_warning() -> None:
    document = changed("emitters/0/closest_approach_nm", 0)
    assert case_from_dict(document).warnings == ()
    document["layers"][3]["material"] = "metal"
    assert case_from_dict(document).warnings == (
        "emitters.green: closest_approach_nm is 0 and the zone reaches an absorber at the top face "
        "of its film, where the dissipated power has no bound",
    )


def test_spectrum_cut_by_the_grid_is_a_warning() -> None:
    case = case_from_dict(changed("emitters/0/spectrum", {"peak_nm": 524, "fwhm_nm": 58}))
    assert case.warnings == (
        "emitters.green: 0.13 % of the spectrum lies outside the wavelength grid of 450 to 700 nm",
    )


def write(folder: Path, name: str, text: str) -> None:
    (folder / name).write_text(text)


def test_table_that_does_not_cover_the_wavelengths(tmp_path: Path) -> None:
    write(tmp_path, "etl.csv", "wavelength_nm,n,k\n460,1.7,0\n650,1.7,0\n")
    document = changed("materials/etl", {"table": "etl.csv"})
    document["layers"][3]["material"] = document["layers"][1]["material"] = "etl"
    assert faults_of(document, tmp_path) == [
        'my.toml: layers.HTL.material: found "etl", known from 460 to 650 nm; expected a material '
        "known at every wavelength of the case, 450 to 700 nm"
    ]


def test_lines_need_coverage_too(tmp_path: Path) -> None:
    write(tmp_path, "etl.csv", "wavelength_nm,n,k\n450,1.7,0\n700,1.7,0\n")
    document = changed("materials/etl", {"table": "etl.csv"})
    document["layers"][3]["material"] = "etl"
    document["emitters"][0]["spectrum"] = {"line_nm": 720}
    assert faults_of(document, tmp_path) == [
        'my.toml: layers.ETL.material: found "etl", known from 450 to 700 nm; expected a material '
        "known at every wavelength of the case, 450 to 720 nm"
    ]


def test_faults_inside_a_table_name_its_line(tmp_path: Path) -> None:
    write(tmp_path, "etl.csv", "wavelength_nm,n,k\n450,1.7,0\n700,1.7,-0.1\n")
    (line,) = faults_of(changed("materials/etl", {"table": "etl.csv"}), tmp_path)
    assert line.startswith("my.toml: materials.etl.table: etl.csv: line 3")
    assert "-0.1" in line


@pytest.mark.parametrize(
    ("rows", "found"),
    [
        ("460,0.02\n524,1\n690,0", "2 % of the peak at its start"),
        ("460,0\n524,1\n690,0.05", "5 % of the peak at its end"),
    ],
)
def test_spectrum_table_that_the_grid_goes_beyond(tmp_path: Path, rows: str, found: str) -> None:
    write(tmp_path, "pl.csv", f"wavelength_nm,value\n{rows}\n")
    document = changed("emitters/0/spectrum", {"table": "pl.csv", "quantity": "photons"})
    assert faults_of(document, tmp_path) == [
        f"my.toml: emitters.green.spectrum.table: found {found}, inside the grid of 450 to 700 nm; "
        "expected under 1 % of the peak at an end that the grid goes beyond"
    ]


def test_spectrum_off_the_grid(tmp_path: Path) -> None:
    write(tmp_path, "pl.csv", "wavelength_nm,value\n800,0\n900,1\n950,0\n")
    document = changed("emitters/0/spectrum", {"table": "pl.csv", "quantity": "photons"})
    assert faults_of(document, tmp_path) == [
        "my.toml: emitters.green.spectrum: found no light at any wavelength of the grid of 450 to "
        "700 nm; expected a spectrum that overlaps the grid"
    ]


def test_spectrum_quantity_that_the_table_contradicts(tmp_path: Path) -> None:
    write(tmp_path, "pl.csv", "# quantity: power\nwavelength_nm,value\n450,0\n500,1\n700,0\n")
    document = changed("emitters/0/spectrum", {"table": "pl.csv", "quantity": "photons"})
    assert faults_of(document, tmp_path) == [
        'my.toml: emitters.green.spectrum.quantity: found "photons", while the table says power; '
        "expected what the table says"
    ]


@pytest.mark.parametrize(
    ("text", "line"),
    [
        (
            "position,density\n0,1\n1.5,1\n",
            "found positions from 0 to 1.5; expected positions from 0 (bottom face) to 1",
        ),
        (
            "position,density\n0,0\n1,0\n",
            "found a density that is zero everywhere; expected some excitons",
        ),
        (
            "position_nm,density\n30,1\n40,1\n",
            "found density from 30 nm on; expected some density inside its film, 0 to 24 nm",
        ),
    ],
)
def test_zone_tables(tmp_path: Path, text: str, line: str) -> None:
    write(tmp_path, "zone.csv", text)
    document = changed("emitters/0/zone", {"shape": "table", "table": "zone.csv"})
    assert faults_of(document, tmp_path) == [f"my.toml: emitters.green.zone.table: {line}"]


def test_filter_tables(tmp_path: Path) -> None:
    write(tmp_path, "f.csv", "wavelength_nm,transmittance\n460,0.5\n700,1.1\n")
    assert faults_of(changed("sides", {"top": {"filter": "f.csv"}}), tmp_path) == [
        "my.toml: sides.top.filter: found a transmittance of 1.1; expected at most 1",
        "my.toml: sides.top.filter: found a table from 460 to 700 nm; expected a table over every "
        "wavelength of the case, 450 to 700 nm",
    ]


def test_syntax_error_tells_line_and_column(tmp_path: Path) -> None:
    file = tmp_path / "case.toml"
    file.write_text('title = "x"\n[wavelength]\nstart_nm = = 3\n')
    with pytest.raises(CaseError) as error:
        read_case(file)
    assert (
        str(error.value) == f"{file}: line 3, column 12: found invalid value; expected valid TOML"
    )
    file.write_text('title = "x')
    with pytest.raises(CaseError, match="line 1"):
        read_case(file)


def test_file_that_is_not_there(tmp_path: Path) -> None:
    (tmp_path / "green.toml").write_text("")
    with pytest.raises(CaseError) as error:
        read_case(tmp_path / "gren.toml")
    assert str(error.value) == (
        f"{tmp_path / 'gren.toml'}: found no such file; expected a case file in TOML "
        "(did you mean green.toml?)"
    )
    with pytest.raises(CaseError, match="directory"):
        read_case(tmp_path)


def test_file_that_is_not_text(tmp_path: Path) -> None:
    (tmp_path / "case.toml").write_bytes(b'title = "\xff"')
    with pytest.raises(CaseError, match="found a byte that is not UTF-8 at offset 9"):
        read_case(tmp_path / "case.toml")


@pytest.mark.parametrize("section", ["layers", "emitters", "materials", "drive", "wavelength"])
@pytest.mark.parametrize("value", [5, "x", [1, "a", {}], {"a": 1}, [], {}, [[]], True])
def test_nonsense_never_escapes_as_another_error(section: str, value: Any) -> None:
    document = full_document()
    document[section] = value
    if section in ("materials", "drive") and value == {}:
        document["layers"] = value
    assert faults_of(document)


def test_everything_missing() -> None:
    assert [line.split(": ")[1] for line in faults_of({})] == [
        "title",
        "wavelength",
        "layers",
        "emitters",
    ]
