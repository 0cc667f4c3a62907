"""A site file is read whole or refused with every fault."""

from __future__ import annotations

import copy
import hashlib
import tomllib
from collections.abc import Callable
from dataclasses import fields
from datetime import date, time
from pathlib import Path
from typing import Any

import pytest

from recon.declare.site import Instrument, Site
from recon.declare.site_file import (
    flowsheet_of,
    read_site,
    read_versions,
    site_from_bytes,
    site_of,
)
from recon.declare.site_shape import LISTS, shape_of
from recon.errors import FaultyFileError, UnreadableFileError

START = Path(__file__).resolve().parents[2] / "config" / "starting-point.toml"
TABLES = tomllib.loads(START.read_text(encoding="utf-8"))
Tables = dict[str, Any]


def entry(tables: Tables, kind: str, name: str) -> Tables:
    found: Tables = next(e for e in tables[kind] if name in (e.get("name"), e.get("tag")))
    return found


def faults_of(change: Callable[[Tables], object]) -> tuple[str, ...]:
    tables = copy.deepcopy(TABLES)
    change(tables)
    with pytest.raises(FaultyFileError) as caught:
        site_of(tables, "site.toml")
    return caught.value.faults


def putting(table: str, of: str, /, **keys: Any) -> Callable[[Tables], object]:
    return lambda tables: entry(tables, table, of).update(keys)


def without(kind: str, name: str, *keys: str) -> Callable[[Tables], object]:
    return lambda tables: [entry(tables, kind, name).pop(key) for key in keys]


def head(**keys: Any) -> Callable[[Tables], object]:
    return lambda tables: tables["site"].update(keys)


def adding(table: str, /, **keys: Any) -> Callable[[Tables], object]:
    return lambda tables: tables.setdefault(table, []).append(keys)


def test_the_starting_point_reads_clean_and_keeps_what_it_says() -> None:
    site = read_site(START).site
    assert (site.zone, site.valid_from, site.day_cut) == (
        "America/Santiago",
        date(2026, 1, 1),
        time(6),
    )
    ore = next(i for i in site.instruments if i.tag == "ORE.WT")
    assert ore.chain[0].tag == "ORE moisture"
    assert ore.uncertainty is not None
    assert (ore.uncertainty.zero, ore.uncertainty.relative) == (10.0, 0.006)
    assert ore.estimate is not None
    assert ore.estimate.days == 7
    assert site.streams[0].target == "FLOTATION"
    assert site.streams[0].source is None


def test_the_starting_point_shows_every_table() -> None:
    shown = START.read_text(encoding="utf-8")
    assert [name for name in LISTS if f"[[{name}]]" not in shown] == []


def test_the_starting_point_names_every_key_of_the_types_it_explains() -> None:
    shown = START.read_text(encoding="utf-8")
    kinds = [Instrument, Site, *(kind for _, kind in LISTS.values())]
    keys = {f.alias or n for k in kinds for n, f in shape_of(k).model_fields.items()}
    assert sorted(key for key in keys - {"sheet"} if f"{key} =" not in shown) == []
    assert "`sheet`" in shown


def test_a_flowsheet_keeps_the_order_of_quantities_and_the_bounds() -> None:
    sheet = flowsheet_of(read_site(START).site)
    assert sheet.quantities == ("mass", "Cu", "Fe", "S", "SiO2")
    assert sheet.node_named["SHED"].stock
    assert sheet.node_named["SHED"].bounds == (("mass", 0.0, 20000.0),)
    assert sheet.stream_named["DESPATCH"].source == "SHED"


def test_the_digest_is_sha256_of_the_bytes_and_the_text_comes_back() -> None:
    content = START.read_bytes()
    version = site_from_bytes(content, "kept in the book")
    assert version.digest == hashlib.sha256(content).hexdigest()
    assert version.text.encode() == content
    assert site_from_bytes(content + b"# a remark\n", "x").digest != version.digest


def test_every_list_of_a_site_has_a_table_in_the_file() -> None:
    filled = {field for field, _ in LISTS.values()} | set(shape_of(Site).model_fields)
    assert filled == {field.name for field in fields(Site)}


@pytest.mark.parametrize(
    ("change", "expected"),
    [
        (head(colour="red"), "site, colour: unknown key."),
        (head(zone="America/Santigo"), 'unknown time zone "America/Santigo". Did you mean'),
        (head(quantities=["mass", "Cu", "Fe", "S"]), '"SiO2" is missing'),
        (head(alarm_level=5), "false-alarm rate above 0 and at most 0.5 is expected, found 5"),
        (head(settling_hours=-1), "settling_hours: must be 0 or more, found -1"),
        (head(settling_hours=float("nan")), "a finite number is expected, found nan"),
        (head(day_cut="6"), "site, day_cut:"),
        (adding("nod", name="X"), 'nod: unknown table. Did you mean "node"?'),
        (adding("section", name="concentrator"), '"concentrator" is used twice'),
        (putting("node", "SHED", section="shed"), 'unknown section "shed"'),
        (putting("node", "SHED", bounds={"mass": [5, 1]}), "0 <= lowest < highest [t], found"),
        (putting("node", "SHED", bounds={"Pb": [0, 1]}), 'unknown quantity "Pb"'),
        (putting("node", "FLOTATION", well_mixed=True), "well_mixed: needs stock = true"),
        (putting("node", "SHED", roll_limit_days=-1), "roll_limit_days: must be 0 or more"),
        (putting("stream", "ORE", to="FLOATATION"), 'Did you mean "FLOTATION"?'),
        (putting("stream", "ORE", carries=["mass", "Cuu"]), 'unknown quantity "Cuu"'),
        (putting("stream", "ORE", carries=[]), "at least one quantity is needed"),
        (putting("stream", "ORE", carries=["Cu", "Cu"]), '"Cu" is named twice'),
        (putting("stream", "ORE", role="product"), 'its role is "receipt"; found "product"'),
        (without("stream", "DESPATCH", "role"), 'its role is "product" or "discard"'),
        (putting("stream", "CONCENTRATE", role="product"), "so it is internal"),
        (without("stream", "ORE", "to"), "has neither from nor to"),
        (putting("stream", "ORE", **{"from": "FLOTATION"}), "leaves and enters the same node"),
        (putting("stream", "ORE", run_signal="ORE.RN"), 'unknown tag "ORE.RN". Did you mean'),
        (putting("source", "moisture oven", u=0), "a standard uncertainty > 0 is expected"),
        (putting("source", "laboratory copper method", u=2), "2 means 200%; write 1 % as 0.01"),
        (without("source", "ore belt scale calibration", "calibrated_by"), "needs the tag whose"),
        (putting("source", "moisture oven", calibrated_by="ORE.WT"), "has an effect with lasts"),
        (putting("instrument", "ORE.WT", unit="tph"), 'unknown unit "tph"'),
        (putting("instrument", "ORE.WT", unit="m3/h"), "moisture ORE moisture [%] does not apply"),
        (putting("instrument", "ORE.WT", unit="t"), '"t" is a unit of mass; an amount by rate'),
        (putting("instrument", "ORE.WT", stream="ORES"), 'unknown stream "ORES". Did you mean'),
        (putting("instrument", "ORE.WT", node="SHED"), "either a stream or the stock of a node"),
        (putting("instrument", "ORE.WT", quantity="Au"), 'unknown quantity "Au"'),
        (without("instrument", "ORE.WT", "quantity"), "quantity: is required where"),
        (without("instrument", "ORE.WT", "uncertainty"), "a reading has no weight"),
        (
            putting("instrument", "ORE.WT", uncertainty={"zero": 0}),
            "uncertainty.zero: a standard uncertainty > 0 is expected [t], found 0",
        ),
        (
            putting("instrument", "ORE Cu", uncertainty={"zero": -1}),
            "uncertainty.zero: a standard uncertainty > 0 is expected [%], found -1",
        ),
        (
            putting("instrument", "ORE.WT", uncertainty={"zero": 1, "relative": 2}),
            "2 means 200%; write 1 % as 0.01",
        ),
        (
            putting("instrument", "ORE.WT", uncertainty={"zero": 1, "sampling": 0.1}),
            "is for assays; a rate has zero and relative",
        ),
        (putting("instrument", "ORE.WT", low=900), "low < high is expected, found 900 and 800"),
        (putting("instrument", "ORE.WT", modulus=10), "is for totaliser instruments"),
        (putting("instrument", "ORE.WT", point="ORE"), "point: is for assay and survey"),
        (putting("instrument", "ORE.WT", service=["nuclar"]), 'Did you mean "nuclear"?'),
        (putting("instrument", "ORE.WT", estimate={"days": 0}), "estimate.days: must be 1"),
        (
            putting("instrument", "ORE.WT", shared=[{"source": "oven"}]),
            'shared: unknown source "oven"',
        ),
        (
            putting("instrument", "ORE.WT", shared=[{"source": "moisture oven", "factor": 0}]),
            "has factor 0; leave it out",
        ),
        (without("instrument", "CONC.TOT", "modulus"), "needs the value at which it rolls over"),
        (putting("instrument", "CONC.TOT", modulus=-1), "modulus: must be > 0, found -1"),
        (without("instrument", "ORE Cu", "point"), "an assay needs point and analyte"),
        (putting("instrument", "ORE Cu", basis="amount"), 'write basis = "fraction"'),
        (putting("instrument", "ORE Cu", unit="g/L"), "a fraction is read in"),
        (putting("instrument", "ORE Cu", quantity="mass"), "dry mass has no fraction"),
        (putting("instrument", "ORE Cu", stages=[]), "name each stage once"),
        (putting("instrument", "ORE Cu", point="CONC"), "one value must not count twice"),
        (putting("stream", "ORE", carries=["Cu"]), 'does not carry "mass"; it carries Cu'),
        (without("instrument", "SHED survey", "analyte"), "needs the item surveyed"),
        (putting("instrument", "SHED survey", node="FLOTATION"), "FLOTATION holds no stock"),
        (putting("instrument", "SHED survey", kind="rate"), "a stock is measured by a survey"),
        (putting("instrument", "SHED survey", chain=[]), "an amount must end as mass"),
        (
            adding("instrument", tag="LOOSE", kind="rate", unit="t/h"),
            "measures no stream or node, and no conversion chain",
        ),
        (
            putting("instrument", "ORE.WT", chain=[{"by": "moisture", "tag": "ORE moist"}]),
            'unknown tag "ORE moist". Did you mean "ORE moisture"?',
        ),
        (
            putting("instrument", "ORE.WT", chain=[{"by": "moisture", "tag": "TAIL.DT"}]),
            '"t/m3" is a unit of density; a unit of fraction is expected',
        ),
        (
            putting("instrument", "ORE.WT", chain=[{"by": "moisture", "value": 8}]),
            "moisture is a fraction of wet mass, found 8",
        ),
        (putting("instrument", "ORE.WT", chain=[{"by": "moisture"}]), "needs a tag or a value"),
        (putting("instrument", "ORE.WT", chain=[{"by": "factor"}]), "factor needs a value"),
        (
            putting("instrument", "ORE.WT", chain=[{"by": "times", "value": 2}]),
            "times needs a tag and no value",
        ),
        (
            putting("instrument", "ORE.WT", chain=[{"by": "times", "tag": "ORE.WT"}]),
            "is the instrument itself",
        ),
        (
            putting("instrument", "TAIL.FT", chain=[{"by": "slurry", "tag": "TAIL.DT"}]),
            "slurry needs the density of solids",
        ),
        (
            putting("instrument", "TAIL.FT", chain=[{"by": "slurry", "value": 2.7}]),
            "slurry needs the instrument of the pulp density",
        ),
        (adding("relation", name="r", terms=[]), "at least one term is needed"),
        (
            adding("relation", name="r", terms=[{"stream": "ACID", "quantity": "S"}]),
            'unknown stream "ACID"',
        ),
        (putting("figure", "Cu recovery", unit="t"), '"t" is a unit of mass; a unit of fraction'),
        (putting("window", "mass pull", low=1), "low < high is expected, found 1 and 0.06"),
        (putting("shift", "night", start=time(6)), "start: the same as of shift 1 (day)"),
        (adding("query", kind="events", query="b.sql"), "events come from query 5"),
        (adding("query", kind="assays", query="a", sheet="b"), "one of the two"),
    ],
)
def test_a_fault_is_named_with_place_and_remedy(
    change: Callable[[Tables], object], expected: str
) -> None:
    faults = faults_of(change)
    assert any(expected in fault for fault in faults), faults


def test_all_faults_are_listed_at_once() -> None:
    def change(tables: Tables) -> None:
        tables["site"]["zone"] = "Nowhere/Land"
        entry(tables, "stream", "ORE")["colour"] = "grey"
        entry(tables, "instrument", "ORE Cu")["unit"] = "pct"
        entry(tables, "node", "SHED")["section"] = "shed"

    assert len(faults_of(change)) == 4


def test_a_faulty_entry_is_not_reported_again_by_those_who_name_it() -> None:
    def change(tables: Tables) -> None:
        entry(tables, "node", "SHED")["colour"] = "grey"
        entry(tables, "instrument", "TAIL.FT")["lo"] = 1.0

    assert len(faults_of(change)) == 2


def test_a_balance_that_would_force_zeros_is_refused_by_node_and_quantity() -> None:
    def change(tables: Tables) -> None:
        for name in ("TAILINGS", "CONCENTRATE"):
            entry(tables, "stream", name)["carries"] = ["mass", "Cu", "Fe", "S"]

    faults = faults_of(change)
    assert any(f.startswith("Node FLOTATION, SiO2: every stream that carries") for f in faults)


def test_a_node_that_no_stream_touches_is_refused() -> None:
    change = adding("node", name="LONELY", section="concentrator", conserves=["Cu"])
    assert any("Node LONELY: no stream enters or leaves it" in f for f in faults_of(change))


def test_a_site_without_streams_is_refused() -> None:
    assert any("nothing is drawn" in f for f in faults_of(lambda tables: tables.pop("stream")))


def test_a_file_that_is_not_toml_or_not_there_is_said_so(tmp_path: Path) -> None:
    with pytest.raises(UnreadableFileError, match="cannot be read"):
        read_site(tmp_path / "absent.toml")
    with pytest.raises(UnreadableFileError, match="is not valid TOML"):
        site_from_bytes(b"[site", "x.toml")
    with pytest.raises(UnreadableFileError, match="is not UTF-8 text"):
        site_from_bytes(b"\xff\xfe", "x.toml")


def test_an_empty_file_names_what_is_missing() -> None:
    with pytest.raises(FaultyFileError) as caught:
        site_of({}, "site.toml")
    assert "site, zone: is required and missing." in caught.value.faults


def versions(folder: Path, *changes: tuple[str, str]) -> None:
    text = START.read_text(encoding="utf-8")
    (folder / "a.toml").write_text(text, encoding="utf-8")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new, 1)
    (folder / "b.toml").write_text(text, encoding="utf-8")


def test_versions_of_a_folder_come_in_the_order_of_their_days(tmp_path: Path) -> None:
    versions(tmp_path, ("2026-01-01", "2025-06-01"))
    found = read_versions(tmp_path)
    assert [v.site.valid_from for v in found] == [date(2025, 6, 1), date(2026, 1, 1)]


@pytest.mark.parametrize(
    ("change", "expected"),
    [
        (("relative = 0.006", "relative = 0.007"), "both are valid from 2026-01-01"),
        (('name = "starting-point"', 'name = "other"'), "they are not versions of one site"),
        (("06:00:00 ", "07:00:00 "), "days would overlap or leave a gap"),
        (('to = "FLOTATION"', 'to = "FLOTTATION"'), "b.toml: stream 1 (ORE), to: unknown node"),
    ],
)
def test_files_that_are_not_versions_of_one_site_are_refused(
    tmp_path: Path, change: tuple[str, str], expected: str
) -> None:
    versions(tmp_path, change)
    with pytest.raises(FaultyFileError) as caught:
        read_versions(tmp_path)
    assert expected in str(caught.value)


def test_a_folder_without_site_files_is_said_so(tmp_path: Path) -> None:
    with pytest.raises(UnreadableFileError, match=r"holds no \.toml file"):
        read_versions(tmp_path)
