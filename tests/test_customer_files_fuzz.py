"""Any bytes and any text: read or refused in words, written and read back without loss."""

import csv
from datetime import date
from pathlib import Path

import geopandas
import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

from planner.customers import CustomerAnswer
from planner.errors import CustomersError
from planner.io.customer_files import (
    read_customers,
    write_customers_csv,
    write_customers_gpkg,
)
from planner.network import Customer

HEADER = b"id,address,latitude,longitude,tag\n"
QUIET = settings(
    deadline=None,
    derandomize=True,
    max_examples=150,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
)
# What a file in UTF-8 can hold; no bare line ends, since CSV libraries join them.
TEXT = st.text(st.characters(exclude_categories=("Cs", "Cc")), max_size=20)
PIECES = st.lists(
    st.sampled_from([b",", b";", b"\t", b'"', b"\n", b"\r\n", b"1", b"-46.2", b"\xff", b"=", b"'"]),
    max_size=40,
).map(b"".join)


@QUIET
@given(st.one_of(st.binary(max_size=200), PIECES, PIECES.map(lambda tail: HEADER + tail)))
@example(HEADER + b'1,"a\n')
@example(b"sep=,\n")
def test_any_bytes_are_a_list_or_refused_in_words(tmp_path: Path, content: bytes):
    """Nothing but CustomersError, and every row has its place or a trouble."""
    path = tmp_path / "list.csv"
    path.write_bytes(content)
    customers, message = (), str(path)
    try:
        customers = read_customers(path)
    except CustomersError as error:
        message = str(error)
    assert message.startswith(str(path))
    rows = [customer.row for customer in customers]
    assert rows == sorted(set(rows))
    for customer in customers:
        usable = abs(customer.latitude) <= 90.0 and abs(customer.longitude) <= 180.0
        assert usable or customer.trouble


@QUIET
@given(st.lists(st.tuples(TEXT, TEXT, TEXT), min_size=1, max_size=4))
@example([("=1", "'=1", "''=1"), ("-3", "'-3", "-3-"), ("'", "+", "@")])
def test_any_text_comes_back_and_no_cell_begins_a_formula(tmp_path: Path, rows):
    """Ids and addresses without the blanks around them; carried text to the letter."""
    customers = [
        Customer(
            row=line,
            id=identity.strip(),
            address=address.strip(),
            latitude=-46.2,
            longitude=-121.4,
            extra=(("tag", tag),),
        )
        for line, (identity, address, tag) in enumerate(rows, start=2)
    ]
    answers = [
        CustomerAnswer(customer=customer, verdict="not computed", reason="@home")
        for customer in customers
    ]
    path = tmp_path / "out.csv"
    write_customers_csv(path, answers)
    assert list(read_customers(path)) == customers
    with path.open(newline="", encoding="utf-8") as file:
        for cells in csv.reader(file):
            for cell in cells:
                assert cell[:1] not in tuple("=+@\t\r\n") or cell == ""
                assert cell[:1] != "-" or float(cell) < 0.0 or cell.strip("-0.") == ""


@pytest.mark.parametrize(
    "name", ['a"b', "x'y", "select", "ü", "a;b", "verdict", "FID", "a.b", "%s"]
)
def test_any_column_name_is_carried_into_the_geopackage(tmp_path: Path, name):
    """Names that mean something in SQL are only names."""
    customer = Customer(
        row=2, id="1", address="", latitude=1.0, longitude=2.0, extra=((name, "v"), ("z", "w"))
    )
    path = tmp_path / "out.gpkg"
    answer = CustomerAnswer(customer=customer, verdict="not computed")
    write_customers_gpkg(path, [answer], date(2026, 1, 1))
    table = geopandas.read_file(path)
    carried = f"{name}_given" if name in ("verdict", "FID") else name
    assert table[carried].tolist() == ["v"]
    assert table["z"].tolist() == ["w"]
