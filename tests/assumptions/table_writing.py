"""Writing table files for the tests: XTbML documents from plain figures, laid out as the standard has it."""

from __future__ import annotations

from pathlib import Path

CELL = tuple[int, ...]


def axis(identifier: str, low: int = 0, high: int = 0, scale: str = "Age", name: str | None = None) -> str:
    return (
        f'<AxisDef id="{identifier}"><ScaleType tc="3">{scale}</ScaleType>'
        f"<AxisName>{identifier if name is None else name}</AxisName>"
        f"<MinScaleValue>{low}</MinScaleValue><MaxScaleValue>{high}</MaxScaleValue></AxisDef>"
    )


def table(axes: str, values: str, title: str = "", factor: str | None = "0") -> str:
    scaling = "" if factor is None else f"<ScalingFactor>{factor}</ScalingFactor>"
    about = f"<MetaData>{scaling}<TableDescription>{title}</TableDescription>{axes}</MetaData>"
    return f"<Table>{about}<Values>{values}</Values></Table>"


def line(rates: dict[int, object]) -> str:
    """Values of one axis."""
    return "<Axis>" + "".join(f'<Y t="{tick}">{rate}</Y>' for tick, rate in rates.items()) + "</Axis>"


def grid(rows: dict[int, dict[int, object]]) -> str:
    """Values of two axes, the outer one first."""
    return "".join(f'<Axis t="{tick}">{line(row)}</Axis>' for tick, row in rows.items())


def by_age(rates: dict[int, object], title: str = "", factor: str | None = "0") -> str:
    return table(axis("Age"), line(rates), title, factor)


def by_age_and_duration(rows: dict[int, dict[int, object]], title: str = "", age: str = "Age") -> str:
    return table(axis(age) + axis("Duration", scale="Ordinal Date"), grid(rows), title)


def document(*tables: str, kind: str = "Insured Lives Mortality", name: str = "Invented lives") -> str:
    about = (
        f"<ContentClassification><TableName>{name}</TableName><TableReference>made up</TableReference>"
        f'<ContentType tc="4">{kind}</ContentType></ContentClassification>'
    )
    return f'<?xml version="1.0" encoding="utf-8"?>\n<XTbML>{about}{"".join(tables)}</XTbML>'


def save(folder: Path, text: str | bytes, name: str = "table.xml") -> Path:
    path = folder / name
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    return path
