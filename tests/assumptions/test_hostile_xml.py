"""Hostile and broken XML: nothing expands, nothing is fetched, and the fault is said in plain words."""

from __future__ import annotations

import time
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from table_writing import by_age, document, save

from assumptions import table_files, xtbml_stream
from assumptions.tables import TableError, read_rates

GOOD = document(by_age({60: 0.5, 61: 1}))
BODY = GOOD.split("\n", 1)[1]

LAUGHS = "".join(f'<!ENTITY l{n} "{f"&l{n - 1};" * 10}">' for n in range(1, 10))
HOSTILE = {
    "billion laughs": f'<!DOCTYPE XTbML [<!ENTITY l0 "ha">{LAUGHS}]>' + BODY.replace("0.5", "&l9;"),
    "quadratic": f'<!DOCTYPE XTbML [<!ENTITY a "{"a" * 50_000}">]>' + BODY.replace("0.5", "&a;" * 50_000),
    "external entity": '<!DOCTYPE XTbML [<!ENTITY secret SYSTEM "file://{secret}">]>' + BODY.replace("0.5", "&secret;"),
    "parameter entity": '<!DOCTYPE XTbML [<!ENTITY % more SYSTEM "file://{secret}"> %more;]>' + BODY,
    "external document type": '<!DOCTYPE XTbML SYSTEM "file://{secret}">' + BODY,
    "plain document type": "<!DOCTYPE XTbML>" + BODY,
}


@pytest.mark.parametrize("name", HOSTILE)
def test_document_types_and_entities_are_refused(tmp_path: Path, name: str) -> None:
    secret = save(tmp_path, "0.123456", "secret.txt")
    path = save(tmp_path, HOSTILE[name].replace("{secret}", str(secret)))
    started = time.perf_counter()
    with pytest.raises(TableError, match="document types, entities and external references are not read") as caught:
        read_rates(path)
    assert time.perf_counter() - started < 2
    assert str(path) in str(caught.value)
    assert "0.123456" not in str(caught.value)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("", "not well-formed XML: no element found"),
        (GOOD[: len(GOOD) // 2], "not well-formed XML"),
        (GOOD[:-3], "not well-formed XML"),
        (GOOD + "<more/>", "not well-formed XML"),
        (GOOD.replace("</Axis>", ""), "not well-formed XML: mismatched tag"),
        (BODY.replace("0.5", "&unknown;"), "not well-formed XML: undefined entity"),
        (GOOD.replace("utf-8", "no-such-code"), "not well-formed XML"),
        (GOOD.replace("utf-8", "utf-7"), "not well-formed XML"),
        (b"\xff\xfe\x00\xd8", "not well-formed XML"),
        (GOOD.encode().replace(b"Invented", b"\xff\xff"), "not well-formed XML"),
        (b"PK\x03\x04 a spreadsheet", "not well-formed XML"),
        ("<html><body/></html>", "the root element is 'html', not 'XTbML'"),
        ("<XTbML/>", "no table in it"),
        (document(), "no table in it"),
        ("<XTbML><Other><Table><Values><Axis/></Values></Table></Other></XTbML>", "no table in it"),
        ("<XTbML><Other><Values><Y>1</Y></Values><Table/></Other></XTbML>", "no table in it"),
        ("<XTbML><Table/></XTbML>", "table 1: no values"),
    ],
)
def test_broken_files(tmp_path: Path, text: str | bytes, said: str) -> None:
    path = save(tmp_path, text)
    with pytest.raises(TableError, match=said) as caught:
        read_rates(path)
    assert str(path) in str(caught.value)


def test_depth_is_bounded(tmp_path: Path) -> None:
    for opening in ("<a>", "<AxisDef>"):
        path = save(tmp_path, "<XTbML><Table><MetaData>" + opening * 200_000)
        with pytest.raises(TableError, match="elements lie more than 24 deep"):
            read_rates(path)
    nested = "".join(f'<Axis t="{tick}">' for tick in range(30))
    with pytest.raises(TableError, match="elements lie more than 24 deep"):
        read_rates(save(tmp_path, "<XTbML><Table><Values>" + nested))
    # Elsewhere than among the values, strange elements within the limit are passed over.
    fine = GOOD.replace("<MetaData>", "<Extra>" * 20 + "</Extra>" * 20 + "<MetaData>")
    assert read_rates(save(tmp_path, fine)).rate(60, 0) == 0.5


def test_size_and_number_of_values_are_bounded(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(xtbml_stream, "MAX_VALUES", 1)
    with pytest.raises(TableError, match="more than 1 values"):
        read_rates(save(tmp_path, GOOD))
    monkeypatch.setattr(table_files, "MAX_BYTES", 100)
    with pytest.raises(TableError, match="the limit for a table file"):
        read_rates(save(tmp_path, GOOD))


def test_far_apart_ticks_do_not_make_a_huge_grid(tmp_path: Path) -> None:
    cells = "".join(f'<Axis t="{tick}"><Axis><Y t="{tick}">0</Y></Axis></Axis>' for tick in range(1500))
    axes = '<AxisDef id="Age"/><AxisDef id="Duration"/>'
    text = f"<XTbML><Table><MetaData>{axes}</MetaData><Values>{cells}</Values></Table></XTbML>"
    with pytest.raises(TableError, match="its axes span more than 1000000 values"):
        read_rates(save(tmp_path, text))


@settings(max_examples=150, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(data=st.data())
def test_a_damaged_file_is_read_or_refused_in_plain_words(tmp_path: Path, data: st.DataObject) -> None:
    content = bytearray(GOOD.encode())
    for _ in range(data.draw(st.integers(1, 4))):
        place = data.draw(st.integers(0, len(content) - 1))
        kind = data.draw(st.sampled_from(["change", "drop", "cut", "double"]))
        if kind == "change":
            content[place] = data.draw(st.integers(0, 255))
        elif kind == "drop":
            del content[place : place + data.draw(st.integers(1, 40))]
        elif kind == "double":
            content[place:place] = content[place : place + 60]
        else:
            del content[place:]
        content = content or bytearray(b" ")
    path = save(tmp_path, bytes(content))
    said = ""
    try:
        rates = read_rates(path)
    except TableError as fault:
        said = str(fault)
    # Anything but a rate or a TableError would have come through.
    assert str(path) in said or 0 <= rates.rate(rates.first_age, 0) <= 1
