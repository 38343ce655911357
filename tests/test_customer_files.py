"""Customer lists: what is read, what is refused, and that tables are whole, stable and safe."""

import csv
import math
import re
import sqlite3
from dataclasses import replace
from datetime import date
from pathlib import Path

import geopandas
import pyogrio
import pytest

from planner.customers import CustomerAnswer
from planner.errors import CustomersError, OutputError
from planner.io import customer_list
from planner.io.customer_columns import COLUMNS, plain_text, spreadsheet_text
from planner.io.customer_files import (
    read_customer_list,
    read_customers,
    write_customers_csv,
    write_customers_gpkg,
)
from planner.network import Customer

HEADER = "id,address,latitude,longitude"
GOOD = "1,Mill Lane 3,-46.2041,-121.4122"
DAY = date(2026, 1, 1)


def listed(folder: Path, *lines: str, encoding: str = "utf-8", end: str = "\n") -> Path:
    path = folder / "customers.csv"
    path.write_bytes((end.join(lines) + end).encode(encoding))
    return path


def answers_of(customers) -> list[CustomerAnswer]:
    """Invented answers that fill every column."""
    return [
        CustomerAnswer(customer=customer, verdict="not computed", reason=customer.trouble)
        if customer.trouble
        else CustomerAnswer(
            customer=customer,
            verdict="not served",
            reason="too far",
            antenna_height_m=customer.antenna_height_m or 5.0,
            tower_id="west",
            sector_id="west-1",
            distance_m=1234.56,
            bearing_to_tower_deg=359.999,
            elevation_angle_deg=-0.001,
            received_signal_dbm=-81.234,
            fade_margin_db=-6.234,
            second_sector_id="west-2",
            server_margin_db=3.0,
            sector_gain_dbi=12.345,
            line_of_sight=False,
            blocking_distance_m=400.04,
            blocking_latitude=-46.2012344,
            blocking_longitude=-121.4012346,
            blocking_excess_m=12.34,
            blocking_ground_m=431.25,
            blocking_obstacle_m=18.0,
            path_loss_db=140.0,
            free_space_loss_db=120.0,
            diffraction_loss_db=20.0,
        )
        for customer in customers
    ]


def test_columns_are_found_by_name_and_the_rest_is_carried(tmp_path):
    """Any order and case; height_m is the antenna's; unknown columns stay as they are."""
    path = listed(
        tmp_path,
        "Phone,Longitude,LATITUDE,height_m,id,address,Note",
        '+49 12,-121.4122, -46.2041 ,7.5,a1,"Mill Lane 3, rear"," keep  me "',
        ",-121.5,-46.3,,a2,,",
    )
    assert read_customers(path) == (
        Customer(
            row=2,
            id="a1",
            address="Mill Lane 3, rear",
            latitude=-46.2041,
            longitude=-121.4122,
            antenna_height_m=7.5,
            extra=(("Phone", "+49 12"), ("height_m", "7.5"), ("Note", " keep  me ")),
        ),
        Customer(
            row=3,
            id="a2",
            address="",
            latitude=-46.3,
            longitude=-121.5,
            extra=(("Phone", ""), ("height_m", ""), ("Note", "")),
        ),
    )


@pytest.mark.parametrize("delimiter", [",", ";", "\t"])
@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig"])
def test_delimiter_line_end_and_byte_order_mark_make_no_difference(
    tmp_path, delimiter, end, encoding
):
    """Other delimiters inside cells do not mislead; rows are the lines of the file."""
    cells = ["7", "Weiher 2; Hof, hinten, links, ganz, oben", "-46.2", "-121.4"]
    quoted = ['"' + cell + '"' for cell in cells]
    path = listed(
        tmp_path,
        delimiter.join(['"id"', '"address"', "latitude", "longitude"]),
        delimiter.join(quoted),
        "",
        delimiter.join(['"8"', '"two\nlines"', "-46.3", "-121.5"]),
        delimiter.join(["9", "Mühle", "-46.4", "-121.6"]),
        encoding=encoding,
        end=end,
    )
    customers = read_customers(path)
    assert [customer.address for customer in customers] == [cells[1], "two\nlines", "Mühle"]
    assert [customer.latitude for customer in customers] == [-46.2, -46.3, -46.4]
    assert [customer.row for customer in customers] == [2, 4, 6]
    assert [customer.trouble for customer in customers] == ["", "", ""]


def test_a_first_line_that_states_the_delimiter_is_followed(tmp_path):
    """Spreadsheets write "sep=;" there."""
    path = listed(tmp_path, "sep=;", HEADER.replace(",", ";"), "1;a;-46.2;-121.4")
    assert [(c.row, c.latitude) for c in read_customers(path)] == [(3, -46.2)]


def test_decimal_commas_are_read_where_the_comma_is_no_delimiter(tmp_path):
    """With a note that says so."""
    path = listed(tmp_path, HEADER.replace(",", ";"), "1;a;-46,25;-121,5", "2;b;-46.25;-121.5")
    read = read_customer_list(path)
    assert [(c.latitude, c.longitude) for c in read.customers] == [(-46.25, -121.5)] * 2
    assert read.notes == ("customers.csv: numbers with a decimal comma in row 2",)


def test_text_that_is_not_utf_8_is_read_as_windows_1252_with_a_note(tmp_path):
    """The note names the first line concerned."""
    path = listed(tmp_path, HEADER, GOOD, "2,Mühlweg 5 €,-46.2,-121.4", encoding="cp1252")
    read = read_customer_list(path)
    assert read.customers[1].address == "Mühlweg 5 €"
    assert read.notes == (
        "customers.csv: not UTF-8 (line 3), read as Windows-1252; check letters with accents",
    )
    assert read_customer_list(listed(tmp_path, HEADER, GOOD)).notes == ()


@pytest.mark.parametrize(
    ("cells", "trouble"),
    [
        (",", "latitude and longitude are missing"),
        ("-46.2,", "longitude is missing"),
        (" ,-121.4", "latitude is missing"),
        ("nan,-121.4", "latitude 'nan' is not a number of decimal degrees"),
        ("-46.2,inf", "longitude 'inf' is not a number of decimal degrees"),
        ("1e999,-121.4", "latitude '1e999' is not a number of decimal degrees"),
        ("4_6,12", "latitude '4_6' is not a number of decimal degrees"),
        (
            "46°12'N,here",
            'latitude "46°12\'N" is not a number of decimal degrees; '
            "longitude 'here' is not a number of decimal degrees",
        ),
        ("512.4,-121.4", "latitude 512.4 is outside -90 to 90"),
        ("-46.2,181", "longitude 181 is outside -180 to 180"),
        (
            "4912345.1,500000",
            "latitude 4912345.1 is outside -90 to 90; it looks like metres of a projected grid, "
            "decimal degrees are needed; longitude 500000 is outside -180 to 180; it looks like "
            "metres of a projected grid, decimal degrees are needed",
        ),
        (
            "-121.4122,-46.2041",
            "latitude -121.4122 is outside -90 to 90: latitude and longitude (-46.2041) seem to be "
            "swapped. Swap the two in the list",
        ),
        ("0,0.0", "latitude and longitude are both 0, which stands for a place that is not known"),
        (
            "-46.2,-121.4,surplus",
            "the row has 5 cells and the header 4: is there a delimiter in a cell without "
            "quotation marks?",
        ),
    ],
)
def test_a_row_without_a_usable_place_is_kept_and_says_why(tmp_path, cells, trouble):
    """Between two good rows; nothing is mended, and no number stands for a place."""
    path = listed(tmp_path, HEADER, GOOD, f"2,b,{cells}", GOOD)
    first, bad, last = read_customers(path)
    assert (first.trouble, last.trouble) == ("", "")
    assert bad.trouble == trouble
    assert (bad.row, bad.id, bad.address) == (3, "2", "b")
    assert math.isnan(bad.latitude) or math.isnan(bad.longitude)


def test_a_short_row_lacks_what_it_lacks(tmp_path):
    """Missing cells at the end are empty."""
    path = listed(tmp_path, HEADER + ",phone", GOOD, "2,b", ",,,,")
    good, short, empty = read_customers(path)
    assert good.extra == (("phone", ""),)
    assert good.trouble == ""
    assert short.trouble == "latitude and longitude are missing"
    assert (empty.row, empty.trouble) == (4, "latitude and longitude are missing")


@pytest.mark.parametrize("height", ["tall", "0", "-3", "nan", "1001", "5 m"])
def test_a_bad_height_is_trouble_and_not_replaced(tmp_path, height):
    """The place is good; the row still cannot be computed."""
    path = listed(tmp_path, HEADER + ",height_m", f"{GOOD},{height}", f"{GOOD},0.5")
    bad, good = read_customers(path)
    assert bad.trouble == f"the height '{height}' is not a number of metres from 0.5 to 1000"
    assert bad.antenna_height_m is None
    assert bad.latitude == -46.2041
    assert (good.trouble, good.antenna_height_m) == ("", 0.5)


def test_the_minus_sign_of_print_is_a_minus(tmp_path):
    """U+2212, as word processors write it."""
    (customer,) = read_customers(listed(tmp_path, HEADER, "1,a,−46.2,−121.4"))
    assert (customer.latitude, customer.longitude) == (-46.2, -121.4)


def message(path: Path) -> str:
    with pytest.raises(CustomersError) as caught:
        read_customers(path)
    return str(caught.value).replace(str(path), "FILE")


FORMAT = "CSV text in UTF-8 with the columns id, address, latitude, longitude"


@pytest.mark.parametrize(
    ("content", "expected"),
    [
        (b"", f"FILE: found an empty file; allowed: {FORMAT}"),
        (b"\xef\xbb\xbf \r\n\r\n", f"FILE: found an empty file; allowed: {FORMAT}"),
        (b"sep=;\n", f"FILE: found an empty file; allowed: {FORMAT}"),
        (
            HEADER.encode() + b"\n\n",
            "FILE: found a header and no customers; allowed: one customer in each line after the "
            "first",
        ),
        (
            b"1,Mill Lane,-46.2,-121.4\n",
            "FILE line 1: found no header but '1, Mill Lane, -46.2, -121.4'; allowed: the names of "
            "the columns: id, address, latitude, longitude. Put a line with the names before the "
            "first customer",
        ),
        (
            b"\nid,Street,LAT,lon\n",
            "FILE line 2: found no column address; allowed: id, address, latitude, longitude. Is "
            "it the column 'Street'? Rename it\n"
            "FILE line 2: found no column latitude; allowed: id, address, latitude, longitude. Is "
            "it the column 'LAT'? Rename it\n"
            "FILE line 2: found no column longitude; allowed: id, address, latitude, longitude. Is "
            "it the column 'lon'? Rename it",
        ),
        (
            b"id,address,latitude,latitude,height_m,antenna_height_m\n",
            "FILE line 1: found no column longitude; allowed: id, address, latitude, longitude\n"
            "FILE line 1: found 2 columns named latitude; allowed: one of that name\n"
            "FILE line 1: found both columns height_m and antenna_height_m; allowed: one height: "
            "the antenna's above ground",
        ),
        (
            HEADER.encode() + b"\n" + GOOD.encode() + b'\n2,"Mill,-46,-121\n3,b,-46,-121\n',
            "FILE line 3: found a quotation mark that is never closed; allowed: a cell in "
            "quotation marks, with each one inside it doubled",
        ),
        (
            HEADER.encode() + b'\n1,"12" Main,-46,-121\n2,b,-46,-121\n3,"5" Main,-46,-121\n',
            "FILE line 2: found text after the closing quotation mark of a cell; allowed: a cell "
            "in quotation marks, with each one inside it doubled\n"
            "FILE line 4: found text after the closing quotation mark of a cell; allowed: a cell "
            "in quotation marks, with each one inside it doubled",
        ),
        (
            b"\x89PNG\r\n\x1a\n\x00\x00",
            f"FILE: found a file that is not text; allowed: {FORMAT}. "
            "Save the list as CSV in UTF-8",
        ),
        (
            b"PK\x03\x04\x14\x00",
            f"FILE: found a spreadsheet or another packed file; allowed: {FORMAT}. Save the sheet "
            "as CSV in UTF-8",
        ),
        (
            HEADER.encode("utf-16"),
            f"FILE: found text in UTF-16; allowed: {FORMAT}. Save it as CSV in UTF-8",
        ),
        (
            HEADER.encode() + b"\n1,\x81\x8d,-46,-121\n",
            "FILE line 2: found bytes that are text neither in UTF-8 nor in Windows-1252; allowed: "
            f"{FORMAT}. Save the list as CSV in UTF-8",
        ),
        (
            HEADER.encode() + b"\n1,a,-121.4,-46.2\n2,b,-121.5,-46.3\n3,c,,\n",
            "FILE, rows 2, 3: found latitudes outside -90 to 90 beside longitudes that would be "
            "latitudes; allowed: latitude (-90 to 90) and longitude (-180 to 180) each in its own "
            "column. Latitude and longitude are swapped: swap the names of the two columns",
        ),
    ],
)
def test_a_file_that_is_no_list_is_refused_with_everything_that_is_wrong(
    tmp_path, content, expected
):
    """The whole message: file, line, what was found, what is allowed."""
    path = tmp_path / "list.csv"
    path.write_bytes(content)
    assert message(path) == expected


def test_a_missing_file_and_a_folder_are_refused(tmp_path):
    """Named, without a traceback of the system's."""
    assert message(tmp_path / "none.csv") == f"FILE: found no such file; allowed: {FORMAT}"
    assert message(tmp_path) == f"FILE: found a folder; allowed: {FORMAT}"


def test_files_over_the_bounds_are_refused(tmp_path, monkeypatch):
    """Bytes, rows and columns are bounded."""
    monkeypatch.setattr(customer_list, "LARGEST_ROWS", 2)
    assert message(listed(tmp_path, HEADER, GOOD, GOOD, GOOD)) == (
        "FILE: found more than 2 customers; allowed: up to 2. Split the list"
    )
    assert len(read_customers(listed(tmp_path, HEADER, GOOD, GOOD))) == 2
    many = ",".join(f"c{number}" for number in range(97))
    assert message(listed(tmp_path, f"{HEADER},{many}", GOOD)) == (
        "FILE line 1: found 101 columns; allowed: up to 100"
    )
    monkeypatch.setattr(customer_list, "LARGEST_FILE_BYTES", 1024**2)
    path = listed(tmp_path, HEADER, GOOD + "x" * 1024**2)
    assert message(path) == (
        "FILE: found a file larger than 1 MB; allowed: up to 1 MB. Split the list"
    )


def test_columns_without_a_name_are_carried_where_they_hold_something(tmp_path):
    """Spreadsheets leave empty ones at the end; columns of one name are told apart."""
    path = listed(tmp_path, HEADER + ",,tag,tag,,", GOOD + ",x,1,2,,", GOOD + ",,3,4,,")
    assert [customer.extra for customer in read_customers(path)] == [
        (("column_5", "x"), ("tag", "1"), ("tag_2", "2")),
        (("column_5", ""), ("tag", "3"), ("tag_2", "4")),
    ]


@pytest.mark.parametrize(
    ("text", "written"),
    [
        ("=1+1", "'=1+1"),
        ("+49 170", "'+49 170"),
        ("+4917", "'+4917"),
        ("-cmd|' /C calc'!A0", "'-cmd|' /C calc'!A0"),
        ("@SUM(A1)", "'@SUM(A1)"),
        ("\t=1", "'\t=1"),
        ("\r=1", "'\r=1"),
        ("＝1", "'＝1"),
        ("'=1", "''=1"),
        ("-12.5", "-12.5"),
        ("-3", "-3"),
        ("-3-4", "'-3-4"),
        ("'-3", "'-3"),
        ("'s Gravenweg", "'s Gravenweg"),
        ("", ""),
        ("'", "'"),
        ("plain = text", "plain = text"),
    ],
)
def test_text_cannot_become_a_formula_and_comes_back(text, written):
    """Guarded by an apostrophe, which reading takes away again; a negative number stays one."""
    assert spreadsheet_text(text) == written
    assert plain_text(written) == text


def test_the_table_has_one_line_per_row_with_fixed_decimals(tmp_path):
    """Numbers that were not computed are empty, -0 and 360 do not occur, text is guarded."""
    path = listed(tmp_path, HEADER + ",Reason,=tag", f"{GOOD},mine,=A1", "=2,,abc,,,", "3,c,0,0,,")
    out = tmp_path / "out.csv"
    write_customers_csv(out, answers_of(read_customers(path)))
    assert out.read_bytes().decode("utf-8").split("\r\n") == [
        "id,address,latitude,longitude,antenna_height_m,verdict,reason,note,best_sector,tower,"
        "distance_m,bearing_to_tower_deg,elevation_angle_deg,received_signal_dbm,fade_margin_db,"
        "second_sector,server_margin_db,sector_gain_dbi,line_of_sight,blocking_distance_m,"
        "blocking_latitude,blocking_longitude,blocking_excess_m,blocking_ground_m,"
        "blocking_obstacle_m,path_loss_db,free_space_loss_db,"
        "diffraction_loss_db,Reason_given,'=tag",
        "1,Mill Lane 3,-46.2041000,-121.4122000,5.00,not served,too far,,west-1,west,1234.6,0.00,"
        "0.00,-81.23,-6.23,west-2,3.00,12.35,no,400.0,-46.201234,-121.401235,12.3,431.2,18.0,140.00,120.00,"
        "20.00,mine,'=A1",
        "'=2,,,,,not computed,latitude 'abc' is not a number of decimal degrees; longitude is "
        "missing" + "," * 23,
        '3,c,,,,not computed,"latitude and longitude are both 0, which stands for a place that is '
        'not known"' + "," * 23,
        "",
    ]


def test_our_own_table_is_read_back_as_the_list_it_came_from(tmp_path):
    """Customers are equal, the computed columns left out with a note; a second round is the same
    bytes."""
    path = listed(
        tmp_path,
        HEADER + ",height_m,verdict,phone",
        f"{GOOD},7.5,old,+49 12",
        '=1,"a, b",-46.3,-121.5,,,-5',
        "3,c,-46.4,-121.6,1e1,'=x,'-5",
    )
    customers = read_customers(path)
    first, second = tmp_path / "first.csv", tmp_path / "second.csv"
    write_customers_csv(first, answers_of(customers))
    again = read_customer_list(first)
    renamed = tuple(
        replace(
            customer,
            extra=tuple(
                (name.replace("verdict", "verdict_given"), text) for name, text in customer.extra
            ),
        )
        for customer in customers
    )
    assert again.customers == renamed
    assert again.notes == (
        "first.csv: the columns of an earlier check are computed anew; a height of its own for a "
        "customer belongs into a column height_m",
    )
    write_customers_csv(second, answers_of(again.customers))
    assert second.read_bytes() == first.read_bytes()


def test_a_height_under_its_other_name_survives_our_own_table(tmp_path):
    """antenna_height_m in a list is the same height; written, it stands in height_m."""
    path = listed(tmp_path, HEADER + ",antenna_height_m", f"{GOOD},9")
    customers = read_customers(path)
    assert customers[0].antenna_height_m == 9.0
    out = tmp_path / "out.csv"
    write_customers_csv(out, answers_of(customers))
    assert read_customers(out) == customers


def test_the_geopackage_holds_the_same_rows_as_points(tmp_path):
    """WGS 84, one layer, in order; numbers as numbers or NULL; no place, an empty geometry."""
    path = listed(
        tmp_path,
        HEADER + ",fid,ID of meter,Geom",
        f"{GOOD},77,=x,g",
        "2,b,,,,,",
        "3,c,-46.3,-121.5,,,",
    )
    answers = answers_of(read_customers(path))
    out = tmp_path / "customers.gpkg"
    write_customers_gpkg(out, answers, DAY)
    assert pyogrio.list_layers(out).tolist() == [["customers", "Point"]]
    table = geopandas.read_file(out)
    assert table.crs.to_epsg() == 4326
    assert table["id"].tolist() == ["1", "2", "3"]
    assert table.geometry.is_empty.tolist() == [False, True, False]
    assert (table.geometry.x[0], table.geometry.y[0]) == (-121.4122, -46.2041)
    assert table["received_signal_dbm"].tolist()[0] == -81.23
    assert math.isnan(table["received_signal_dbm"].tolist()[1])
    assert table["line_of_sight"].tolist() == ["no", "", "no"]
    assert table["fid_given"].tolist() == ["77", "", ""]
    assert table["Geom_given"].tolist() == ["g", "", ""]
    assert table["ID of meter"].tolist() == ["=x", "", ""]
    connection = sqlite3.connect(out)
    nulls = connection.execute("select count(*) from customers where path_loss_db is null")
    assert nulls.fetchone() == (1,)
    connection.close()
    write_customers_csv(tmp_path / "customers.csv", answers)
    with (tmp_path / "customers.csv").open(newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(file))
    for name in ("distance_m", "blocking_latitude", "fade_margin_db", "longitude"):
        written = [float(row[name]) if row[name] else None for row in rows]
        in_table = [None if math.isnan(value) else value for value in table[name].tolist()]
        assert written == in_table


def test_the_same_answers_give_the_same_bytes_and_no_clock(tmp_path):
    """Both files twice; GDAL's stamp is the day given, and its setting is as it was."""
    path = listed(tmp_path, HEADER + ",phone", f"{GOOD},1", "2,b,,,2")
    answers = answers_of(read_customers(path))
    pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": "2001-02-03T00:00:00.000Z"})
    try:
        for name in ("one", "two"):
            (tmp_path / name).mkdir()
            write_customers_gpkg(tmp_path / name / "customers.gpkg", answers, DAY)
            write_customers_csv(tmp_path / name / "customers.csv", answers)
        assert pyogrio.get_gdal_config_option("OGR_CURRENT_DATE") == "2001-02-03T00:00:00.000Z"
    finally:
        pyogrio.set_gdal_config_options({"OGR_CURRENT_DATE": None})
    for name in ("customers.gpkg", "customers.csv"):
        one, two = (tmp_path / folder / name for folder in ("one", "two"))
        assert one.read_bytes() == two.read_bytes()
        assert list((tmp_path / "one").iterdir()) != []
    connection = sqlite3.connect(tmp_path / "one" / "customers.gpkg")
    stamp = connection.execute("select last_change from gpkg_contents").fetchall()
    connection.close()
    assert stamp == [("2026-01-01T00:00:00.000Z",)]
    names = sorted(path.name for path in (tmp_path / "one").iterdir())
    assert names == ["customers.csv", "customers.gpkg"]
    write_customers_gpkg(tmp_path / "three.gpkg", answers, DAY)
    assert pyogrio.get_gdal_config_option("OGR_CURRENT_DATE") is None


def test_lists_without_any_place_or_row_are_written(tmp_path):
    """All geometries empty; no answer at all."""
    path = listed(tmp_path, HEADER, "1,a,,", "2,b,x,y")
    write_customers_gpkg(tmp_path / "a.gpkg", answers_of(read_customers(path)), DAY)
    assert geopandas.read_file(tmp_path / "a.gpkg").geometry.is_empty.tolist() == [True, True]
    write_customers_gpkg(tmp_path / "b.gpkg", [], DAY)
    assert len(geopandas.read_file(tmp_path / "b.gpkg")) == 0
    write_customers_csv(tmp_path / "b.csv", [])
    assert (tmp_path / "b.csv").read_bytes().count(b"\r\n") == 1


def test_a_target_that_cannot_be_written_is_an_output_error(tmp_path):
    """The path is named and nothing is left behind."""
    (tmp_path / "taken").write_text("a file where a folder is needed")
    answers = answers_of(read_customers(listed(tmp_path, HEADER, GOOD)))
    target = tmp_path / "taken" / "customers"
    with pytest.raises(OutputError, match="could not be written"):
        write_customers_csv(target.with_suffix(".csv"), answers)
    with pytest.raises(OutputError, match="could not be written"):
        write_customers_gpkg(target.with_suffix(".gpkg"), answers, DAY)
    assert pyogrio.get_gdal_config_option("OGR_CURRENT_DATE") is None


def test_the_page_names_every_column_of_the_table_in_order():
    """docs/customers.md and the code agree, bounds included."""
    page = (Path(__file__).parents[1] / "docs" / "customers.md").read_text(encoding="utf-8")
    table = page.split("## The table")[1].split("### The table as a list")[0]
    named = re.findall(r"^\| `([a-z_]+)` \|", table, flags=re.MULTILINE)
    assert named == [column.name for column in COLUMNS]
    assert f"{customer_list.LARGEST_FILE_BYTES // 1024**2} MB" in page
    assert f"{customer_list.LARGEST_ROWS:,} customers" in page
    assert f"{customer_list.LARGEST_COLUMNS} columns" in page


def test_the_list_on_the_page_can_be_read(tmp_path):
    """The example of docs/customers.md."""
    page = (Path(__file__).parents[1] / "docs" / "customers.md").read_text(encoding="utf-8")
    path = listed(tmp_path, page.split("```csv\n")[1].split("```")[0])
    customers = read_customers(path)
    assert [(c.id, c.antenna_height_m, c.trouble) for c in customers] == [
        ("17", 7.5, ""),
        ("18", None, ""),
    ]
