"""Tables as laboratories send them: each oddity read where it is plain, refused with row and column where not."""

from __future__ import annotations

from pathlib import Path

import pytest

from earthwork.errors import FileError
from earthwork.files.soil_tests import read_compaction_points, read_density_tests
from earthwork.files.table_reader import read_source_table

PLAIN = "water_content_percent,dry_density_kg_m3\n10.5,1700\n12,1750\n"


@pytest.fixture
def write(tmp_path: Path):
    def writer(content: str | bytes, name: str = "tests.csv") -> Path:
        path = tmp_path / name
        path.write_bytes(content.encode() if isinstance(content, str) else content)
        return path

    return writer


def states(path: Path, **options) -> list[tuple[float, float]]:
    found = read_compaction_points(path, **options).points
    return [(p.water_content_percent, round(p.dry_density_kg_m3, 3)) for p in found]


@pytest.mark.parametrize(
    "content",
    [
        PLAIN,
        "\ufeff" + PLAIN,
        PLAIN.replace("\n", "\r\n"),
        PLAIN.replace(",", "\t"),
        PLAIN.replace("10.5,1700\n", "10.5,1700\n\n,\n"),
        "# sent by the lab on Monday, by mail\n" + PLAIN,
        PLAIN.replace(",", ";").replace("10.5", "10,5"),
        "sep=;\n" + PLAIN.replace(",", ";").replace("10.5", "10,5"),
        PLAIN.encode("utf-16"),
        "Water content (%),Dry density (kg/m³)\n10.5,1700\n12,1750\n",
        "Water content [%];Dry density [t/m³]\n10,5;1,7\n12;1,75\n".encode("cp1252"),
        "water content,dry density\n%,kg/m3\n10.5,1700\n12,1750\n",
        "water_content_percent,dry_density_kg_m3\n%,kg/m³\n10.5,1700\n12,1750\n",
        "moisture_content_percent,dry_density_g_cm3\n10.5,1.7\n12,1.75\n",
        "water_content_fraction,dry_density_t_m3\n0.105,1.7\n0.12,1.75\n",
        "dry_density_kg_m3,remark,water_content_percent\n1700,\"two\nlines, one cell\",10.5\n1750,,12 %\n",
        'water_content_percent,dry_density_t_m3\n"10,5","1,70"\n"12,0","1,75"\n',
        "point,water_content_percent,dry_density_kg_m3\n1,10.5,1700\n2,-,1720\n3,n/a,\n4,12,1750\n",
    ],
)  # fmt: skip
def test_what_is_plain_is_read(write, content: str | bytes) -> None:
    assert states(write(content)) == [(10.5, 1700.0), (12.0, 1750.0)]


def test_rows_are_named_as_the_spreadsheet_numbers_them(write) -> None:
    points = read_compaction_points(write("# note\nwater content,dry density\n%,kg/m3\n\n10.5,1700\n12,1750\n")).points
    assert [p.place for p in points] == ["tests.csv row 5", "tests.csv row 6"]


def test_us_units(write) -> None:
    path = write("water_content_percent,dry_density_lb_ft3\n10,110\n")
    assert states(path) == [(10.0, 1762.031)]
    assert states(write("water_content_percent,dry_density_pcf\n10,110\n")) == [(10.0, 1762.031)]


def test_moist_density_is_dried(write) -> None:
    path = write("water_content_percent,moist_density_kg_m3\n10,1760\n")
    assert states(path) == [(10.0, 1600.0)]


def test_raw_bench_data(write) -> None:
    # (3,325 − 1,484.5) g / 937.4 cm³ = 1,963.4 kg/m³ moist; water (31.61 − 29.712) / (29.712 − 1.282) =
    # 6.676 %.
    header = "mould_volume_cm3,mould_mass_g,mould_and_soil_mass_g,tin_mass_g,tin_and_moist_mass_g,tin_and_dry_mass_g"
    [(water, dry)] = states(write(f"{header}\n937.4,1484.5,3325,1.282,31.61,29.712\n"))
    assert water == pytest.approx(6.6760, abs=1e-4)
    assert dry == pytest.approx(1840.5, abs=0.1)


@pytest.mark.parametrize(
    ("content", "message"),
    [
        ("water_content_percent,dry_density_kg_m3\n10,5,1700\n", "row 2, column 3: 3 cells.*Decimal commas"),
        ("water_content_percent;dry_density_kg_m3\n10,5;1700.5\n", "decimal commas and decimal points in one file"),
        ('water_content_percent,dry_density_kg_m3\n10,"1,700"\n', "row 2, column dry_density_kg_m3: '1,700' may have"),
        ("water_content_percent,dry_density_kg_m3\n0.105,1700\n", r"column water_content_percent: 0\.105 looks like a f"),
        ("water_content_fraction,dry_density_kg_m3\n10.5,1700\n", "column water_content_fraction: 10.5 looks like percent"),
        ("water_content_percent,dry_density_kg_m3\n-1,1700\n", "a water content must be 0 to 500 %"),
        ("water_content_percent,dry_density_kg_m3\n10,110\n", "row 2, column dry_density_kg_m3: 110 .* looks like lb/ft3"),
        ("water_content_percent,dry_density_kg_m3\n10,1.7\n", "looks like t/m3"),
        ("water_content_percent,dry_density_kg_m3\n10,17.5\n", "looks like kN/m3"),
        ("water_content_percent,dry_density_lb_ft3\n10,1700\n", "looks like kg/m3"),
        ("water_content_percent,dry_density_kg_m3\nten,1700\n", "row 2, column water_content_percent: 'ten' is not a number"),
        ("water_content_percent,dry_density_kg_m3\n>10,1700\n", "is a bound, not a value"),
        ("water_content_percent,dry_density_kg_m3\n10,1700 kg/m3\n", "has a unit; put kg/m3 into the name"),
        ("water_content_percent,dry_density_kg_m3\n10,1700,9\n", "3 cells, but the header names 2 columns"),
        ("water_content_percent,dry_density\n10,1700\n", "column dry_density has no unit"),
        ("water_content_percent,bulk_density_kg_m3\n10,1700\n", "A bulk density may be moist or dry"),
        ("water content,dry density (lb/ft3)\n%,kg/m3\n10,1700\n", "the unit row says kg/m3"),
        ("water_content_percent,dry_density_kg_m3,dry_density_pcf\n10,1700,106\n", "give the same quantity; keep one"),
        ("a,a,water_content_percent\n1,2,10\n", "the column a comes twice"),
        ("10,1700\n12,1750\n", "the first row has numbers only"),
        ("water_content_percent,dry_density_kg_m3\n", "a header and no rows"),
        ("", "empty"),
        (b"PK\x03\x04zip", "a workbook, not CSV"),
        (b"\x00\x01\x02", "not text"),
        ("water_content_percent,moist_density_kg_m3\n,1760\n", "row 2, column water_content_percent: missing; a moist"),
    ],
)  # fmt: skip
def test_what_can_be_read_two_ways_is_refused(write, content: str | bytes, message: str) -> None:
    with pytest.raises(FileError, match=message):
        read_compaction_points(write(content))


def test_every_fault_comes_in_one_message(write) -> None:
    path = write("water_content_percent,dry_density_kg_m3\n0.1,1700\n12,x\n13,110\n")
    with pytest.raises(FileError, match=r"3 faults\n  row 2.*\n  row 3.*\n  row 4"):
        read_compaction_points(path)


def test_a_long_list_of_faults_is_cut(write) -> None:
    path = write("water_content_percent,dry_density_kg_m3\n" + "0.1,1700\n0.2,1700\n" * 10 + "0.3,1700\n")
    with pytest.raises(FileError, match="and 9 more like these"):
        read_compaction_points(
            write("water_content_percent,dry_density_kg_m3\n" + "".join(f"0.1,{1700 + i}\n" for i in range(21)))
        )
    assert path.exists()


def test_missing_files_and_folders(tmp_path: Path) -> None:
    with pytest.raises(FileError, match="no such file"):
        read_compaction_points(tmp_path / "none.csv")
    with pytest.raises(FileError, match="is a folder"):
        read_compaction_points(tmp_path)


def test_doubled_rows_count_once_and_are_named(write) -> None:
    reading = read_compaction_points(write("water_content_percent,dry_density_kg_m3\n10,1700\n12,1750\n10 ,1700\n"))
    assert len(reading.points) == 2
    [(code, message)] = reading.notes
    assert code == "duplicate-rows"
    assert "row 4 (as row 2)" in message


def test_repeats_under_other_names_stay(write) -> None:
    path = write("point,water_content_percent,dry_density_kg_m3\nA1,10,1700\nA2,10,1700\n")
    assert len(read_compaction_points(path).points) == 2


def test_rows_without_values_are_named(write) -> None:
    reading = read_compaction_points(write("water_content_percent,dry_density_kg_m3\n10,1700\n12,\n-,1750\n"))
    assert len(reading.points) == 1
    assert reading.notes[0][0] == "rows-without-values"
    assert "row 3, 4" in reading.notes[0][1]


def test_really_dry_soil_is_written_with_its_sign(write) -> None:
    assert states(write("water_content_percent,dry_density_kg_m3\n0.3 %,1700\n")) == [(0.3, 1700.0)]


METHODS = "method,water_content_percent,dry_density_kg_m3\nASTM D698,10,1700\nD1557,12,1750\nstandard,11,1720\n"


def test_efforts_are_never_mixed(write) -> None:
    path = write(METHODS)
    with pytest.raises(FileError, match="points of ASTM D698 and D1557; efforts are never mixed"):
        read_compaction_points(path)
    assert states(path, method="ASTM D698") == [(10.0, 1700.0), (11.0, 1720.0)]
    assert states(path, method="modified") == [(12.0, 1750.0)]
    with pytest.raises(FileError, match="no point is of ASTM D1557"):
        read_compaction_points(
            write("method,water_content_percent,dry_density_kg_m3\nASTM D698,10,1700\n"), method="ASTM D1557"
        )
    with pytest.raises(FileError, match="row 5 names no method"):
        read_compaction_points(write(METHODS + ",13,1700\n"), method="standard")


def test_rows_of_one_material(write) -> None:
    path = write("material,water_content_percent,dry_density_kg_m3\nloess,10,1700\nClay,12,1750\n")
    assert states(path, material="clay") == [(12.0, 1750.0)]
    with pytest.raises(FileError, match="no row has material = till; it has loess, Clay"):
        read_compaction_points(path, material="till")


def test_tins_and_a_stated_water_content_must_agree(write) -> None:
    path = write(
        "water_content_percent,dry_density_kg_m3,tin_mass_g,tin_and_moist_mass_g,tin_and_dry_mass_g\n"
        "15,1700,10,125,110\n12,1700,10,125,110\n"
    )
    with pytest.raises(FileError, match=r"row 3, column water_content: 12 % is given, but the tins say 15\.00 %"):
        read_compaction_points(path)


def test_field_tests_of_all_kinds(write) -> None:
    cone = read_density_tests(
        write(
            "test,lift,water_content_percent,hole_soil_mass_g,sand_used_mass_g,cone_sand_mass_g,sand_density_g_cm3\n"
            "S1,3,12,3000,4000,1500,1.5\n"
        )
    ).tests[0]
    assert cone.dry_density_kg_m3 == pytest.approx(1800 / 1.12)
    assert (cone.name, cone.group) == ("S1", "3")
    cylinder = read_density_tests(
        write(
            "test,water_content_percent,cylinder_volume_cm3,cylinder_mass_g,cylinder_and_soil_mass_g\nD1,10,1000,1200,3180\n"
        )
    ).tests[0]
    assert cylinder.dry_density_kg_m3 == pytest.approx(1800)
    gauge = read_density_tests(
        write("test,moist_density_kg_m3,gauge_water_kg_m3,gauge_water_offset_kg_m3\nN1,1980,200,-20\n")
    ).tests[0]
    assert (gauge.dry_density_kg_m3, gauge.water_content_percent) == (1800.0, 10.0)


def test_an_oven_water_content_wins_over_the_gauge(write) -> None:
    content = "test,moist_density_kg_m3,gauge_water_kg_m3,water_content_percent\nN1,1980,250,10\n"
    assert read_density_tests(write(content)).tests[0].dry_density_kg_m3 == pytest.approx(1800)


def test_field_tests_may_lack_water_and_have_more_columns(write) -> None:
    content = "test,depth,elevation,easting,dry_density_kg_m3,weather\nA,2,612.5,500100.5,1500,rain\n"
    test = read_density_tests(write(content), length_m=0.3048).tests[0]
    assert test.water_content_percent is None
    assert test.depth_m == pytest.approx(0.6096)
    assert test.elevation_m == pytest.approx(612.5 * 0.3048)
    assert test.easting == 500100.5


def test_readings_that_cannot_be_are_named(write) -> None:
    content = "test,water_content_percent,cylinder_volume_cm3,cylinder_mass_g,cylinder_and_soil_mass_g\nD1,10,1000,3180,1200\n"
    with pytest.raises(
        FileError, match=r"row 2, column cylinder_and_soil_mass: drive cylinder: .* check which is which"
    ):
        read_density_tests(write(content))


def test_columns_of_a_table(write) -> None:
    table = read_source_table(write("Test No.;Dry density, kg/m³;Water %\n1;1700;12,5\n"))
    assert table.columns == ("test_no", "dry_density_kg_m3", "water_percent")
    assert table.decimal_comma
    assert table.number(table.rows[0], "water_percent") == 12.5


def test_quoted_commas_that_may_be_for_thousands_are_refused(write) -> None:
    path = write('water_content_percent,dry_density_kg_m3\n10,"1,700"\n12,"1,750"\n')
    with pytest.raises(FileError, match="row 2, column dry_density_kg_m3: '1,700' may have a decimal comma"):
        read_compaction_points(path)


def test_rows_of_no_material_are_told(write) -> None:
    path = write(
        "test,material,dry_density_kg_m3\na,loess,1430\nb,losse,1440\nc,,1450\nd,shale,2250\ne,Loess,1420\n"
    )
    reading = read_density_tests(path, material="loess", known=("loess", "shale"))
    assert [test.name for test in reading.tests] == ["a", "e"]
    assert reading.notes == (
        ("rows-of-no-material", f"{path}: of no material of the site, and left out: row 3 (losse), 4 (no name)"),
    )


def test_a_curve_from_columns_of_a_cylinder(write) -> None:
    # 2,000 g in 1,000 cm³ at 25 %: 1,600 kg/m³ dry.
    text = "cylinder_volume_cm3,cylinder_mass_g,cylinder_and_soil_mass_g,water_content_percent\n1000,4200,6200,25\n"
    assert states(write(text)) == [(25.0, 1600.0)]


@pytest.mark.parametrize(
    ("rows", "message"),
    [
        # 1,620 kg/m³ moist at 8 % is 1,500 dry.
        (
            "moist_density_kg_m3,dry_density_kg_m3,water_content_percent\n1620,1500,8\n1620,1620,8\n",
            "row 3, column dry_density: 1620 kg/m³ is given, but the moist density 1620 kg/m³ at 8 % is 1500 kg/m³ dry",
        ),
        ("depth,dry_density_kg_m3\n1.2,1500\n-1.2,1500\n", "row 3, column depth: it is less than 0"),
    ],
)
def test_rows_that_contradict_themselves(write, rows: str, message: str) -> None:
    with pytest.raises(FileError, match=message):
        read_density_tests(write(rows))
