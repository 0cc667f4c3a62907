"""A five-node site that anybody can follow by hand: shed, furnace, converter, casting, acid plant.

Concentrate is received on the weighbridge into a shed (the one stock), drawn over a belt scale into
a furnace with silica flux, matte goes to a converter with its own flux and its slag comes back to
the furnace, blister is cast to anodes, and the sulfur of both gases becomes acid and tail gas. The
converter slag's mass and the converter gas are not measured: the balances find them.
`tests.fakes.five_node_rows` makes its readings and documents from a known truth.
"""

from __future__ import annotations

from datetime import date, time

from recon.declare.site import (
    ErrorSource,
    Instrument,
    PlausibilityWindow,
    Section,
    SharedBy,
    Site,
    SiteFigure,
    SiteNode,
    SiteStream,
    Step,
    Term,
    Uncertainty,
)

ALL = ("mass", "Cu", "Fe", "S", "SiO2")
RUN = "FURNACE-RUN"
SULFUR_IN_ACID = 32.06 / 98.08
"""Mass of S per mass of H2SO4 (IUPAC abridged atomic weights)."""
SULFUR_IN_SO2 = 32.06 / 64.06
SULFUR_PER_NM3 = 32.06e-3 / 22.414
"""Tonnes of S per normal cubic metre of SO2, as an ideal gas."""


def five_node_site(
    *,
    name: str = "five nodes",
    valid_from: date = date(2025, 1, 1),
    zone: str = "Europe/Berlin",
    day_cut: time = time(6, 0),
) -> Site:
    """Declare the site; every instrument has an uncertainty, several share an error source."""
    return Site(
        name=name,
        title="Five-node example",
        zone=zone,
        valid_from=valid_from,
        day_cut=day_cut,
        quantities=ALL,
        sections=(
            Section(name="yard", title="Concentrate yard"),
            Section(name="smelter", title="Smelter"),
            Section(name="acid", title="Acid plant"),
        ),
        nodes=_nodes(),
        streams=_streams(),
        instruments=(*_meters(), *_assays(), *_surveys()),
        sources=_sources(),
        figures=(
            SiteFigure(
                name="Cu recovery, charge to anode",
                of=(Term(stream="ANODE", quantity="Cu"),),
                over=(Term(stream="CHARGE", quantity="Cu"),),
            ),
            SiteFigure(
                name="S capture as acid",
                of=(Term(stream="ACID", quantity="S"),),
                over=(Term(stream="CHARGE", quantity="S"),),
            ),
        ),
        windows=(
            PlausibilityWindow(
                name="slag Fe/SiO2",
                of=(Term(stream="SLAG", quantity="Fe"),),
                over=(Term(stream="SLAG", quantity="SiO2"),),
                low=1.1,
                high=1.6,
            ),
        ),
    )


def _nodes() -> tuple[SiteNode, ...]:
    melt = ("Cu", "Fe", "S", "SiO2")
    return (
        SiteNode(name="SHED", section="yard", conserves=ALL, stock=True, well_mixed=True),
        SiteNode(name="FURNACE", section="smelter", conserves=melt),
        SiteNode(name="CONVERTER", section="smelter", conserves=melt),
        SiteNode(name="CASTING", section="smelter", conserves=("Cu",)),
        SiteNode(name="ACIDPLANT", section="acid", conserves=("S",)),
    )


def _streams() -> tuple[SiteStream, ...]:
    return (
        SiteStream(name="CONC", target="SHED", carries=ALL, role="receipt"),
        SiteStream(name="CHARGE", source="SHED", target="FURNACE", carries=ALL, run_signal=RUN),
        SiteStream(
            name="FLUX",
            target="FURNACE",
            carries=("mass", "Fe", "SiO2"),
            role="receipt",
            run_signal=RUN,
        ),
        SiteStream(
            name="MATTE",
            source="FURNACE",
            target="CONVERTER",
            carries=("mass", "Cu", "Fe", "S"),
            run_signal=RUN,
        ),
        SiteStream(name="SLAG", source="FURNACE", carries=ALL, role="discard", run_signal=RUN),
        SiteStream(
            name="FGAS", source="FURNACE", target="ACIDPLANT", carries=("S",), run_signal=RUN
        ),
        SiteStream(
            name="CFLUX",
            target="CONVERTER",
            carries=("mass", "Fe", "SiO2"),
            role="receipt",
            run_signal=RUN,
        ),
        SiteStream(name="CSLAG", source="CONVERTER", target="FURNACE", carries=ALL, run_signal=RUN),
        SiteStream(
            name="CGAS", source="CONVERTER", target="ACIDPLANT", carries=("S",), run_signal=RUN
        ),
        SiteStream(
            name="BLISTER",
            source="CONVERTER",
            target="CASTING",
            carries=("mass", "Cu"),
            run_signal=RUN,
        ),
        SiteStream(
            name="ANODE", source="CASTING", carries=("mass", "Cu"), role="product", run_signal=RUN
        ),
        SiteStream(name="ACID", source="ACIDPLANT", carries=("S",), role="product", run_signal=RUN),
        SiteStream(
            name="TAILGAS", source="ACIDPLANT", carries=("S",), role="discard", run_signal=RUN
        ),
    )


def _sources() -> tuple[ErrorSource, ...]:
    return (
        ErrorSource(
            name="belt scale",
            u=0.005,
            relative=True,
            lasts="calibration",
            calibrated_by="CHARGE-WI",
        ),
        ErrorSource(name="weighbridge", u=0.001, relative=True),
        ErrorSource(name="crane scale", u=0.010, relative=True),
        ErrorSource(name="laboratory Cu", u=0.003, relative=True),
        ErrorSource(name="laboratory Fe", u=0.005, relative=True),
        ErrorSource(name="laboratory S", u=0.005, relative=True),
        ErrorSource(name="moisture oven", u=0.10, relative=False),
        ErrorSource(name="survey density", u=0.02, relative=True),
        ErrorSource(name="gas analyser", u=0.015, relative=True, lasts="day"),
    )


def _shared(*names: str) -> tuple[SharedBy, ...]:
    return tuple(SharedBy(source=name) for name in names)


def _meters() -> tuple[Instrument, ...]:
    def moisture(tag: str) -> tuple[Step, ...]:
        return (Step(by="moisture", tag=tag),)

    def ladle(tag: str, stream: str, u: float, source: str) -> Instrument:
        return Instrument(
            tag=tag,
            kind="tickets",
            unit="t",
            stream=stream,
            quantity="mass",
            low=0.0,
            high=400.0,
            uncertainty=Uncertainty(zero=0.05, relative=u),
            shared=_shared(source),
        )

    return (
        Instrument(tag=RUN, kind="rate", unit="1"),
        Instrument(
            tag="CONC-WT",
            kind="tickets",
            unit="t",
            stream="CONC",
            quantity="mass",
            chain=moisture("CONC H2O"),
            low=0.0,
            high=300.0,
            uncertainty=Uncertainty(zero=0.1, relative=0.002),
            shared=_shared("weighbridge"),
            service=("custody",),
        ),
        Instrument(
            tag="CHARGE-WI",
            kind="rate",
            unit="t/h",
            stream="CHARGE",
            quantity="mass",
            chain=moisture("CHARGE H2O"),
            low=-1.0,
            high=120.0,
            uncertainty=Uncertainty(zero=0.5, relative=0.005),
            shared=_shared("belt scale"),
        ),
        *(
            Instrument(
                tag=f"{stream}-WI",
                kind="rate",
                unit="kg/s",
                stream=stream,
                quantity="mass",
                low=0.0,
                high=20.0,
                uncertainty=Uncertainty(zero=0.1, relative=0.010),
            )
            for stream in ("FLUX", "CFLUX")
        ),
        ladle("MATTE-WT", "MATTE", 0.015, "crane scale"),
        ladle("SLAG-WT", "SLAG", 0.030, "crane scale"),
        ladle("BLISTER-WT", "BLISTER", 0.010, "crane scale"),
        ladle("ANODE-WT", "ANODE", 0.0015, "weighbridge"),
        Instrument(
            tag="FGAS-FI",
            kind="rate",
            unit="kNm3/h",
            stream="FGAS",
            quantity="S",
            chain=(
                Step(by="times", tag="FGAS-QI"),
                Step(by="factor", value=SULFUR_PER_NM3),
            ),
            uncertainty=Uncertainty(zero=0.5, relative=0.02),
            shared=_shared("gas analyser"),
        ),
        Instrument(tag="FGAS-QI", kind="rate", unit="%", low=0.0, high=100.0),
        Instrument(
            tag="ACID-FQ",
            kind="totaliser",
            unit="t",
            stream="ACID",
            quantity="S",
            chain=(
                Step(by="times", tag="ACID H2SO4"),
                Step(by="factor", value=SULFUR_IN_ACID),
            ),
            modulus=100_000.0,
            uncertainty=Uncertainty(zero=0.2, relative=0.004),
        ),
        Instrument(
            tag="TAILGAS-FI",
            kind="rate",
            unit="kNm3/h",
            stream="TAILGAS",
            quantity="S",
            chain=(
                Step(by="times", tag="TAILGAS-QI"),
                Step(by="factor", value=SULFUR_IN_SO2),
            ),
            uncertainty=Uncertainty(zero=0.01, relative=0.05),
        ),
        Instrument(tag="TAILGAS-QI", kind="rate", unit="mg/Nm3", low=0.0, high=50_000.0),
        Instrument(
            tag="STACK-S",
            kind="rate",
            unit="kg/h",
            stream="TAILGAS",
            quantity="S",
            use="compare",
            uncertainty=Uncertainty(zero=0.01, relative=0.04),
            service=("statutory",),
        ),
    )


def _assays() -> tuple[Instrument, ...]:
    samples: dict[str, dict[str, float]] = {
        "CONC": {"Cu": 0.006, "Fe": 0.008, "S": 0.008, "SiO2": 0.015},
        "CHARGE": {"Cu": 0.008, "Fe": 0.010, "S": 0.010, "SiO2": 0.020},
        "FLUX": {"Fe": 0.030, "SiO2": 0.010},
        "MATTE": {"Cu": 0.008, "Fe": 0.015, "S": 0.010},
        "SLAG": {"Cu": 0.050, "Fe": 0.010, "S": 0.050, "SiO2": 0.012},
        "CFLUX": {"Fe": 0.030, "SiO2": 0.010},
        "CSLAG": {"Cu": 0.040, "Fe": 0.012, "S": 0.050, "SiO2": 0.015},
        "BLISTER": {"Cu": 0.0005},
        "ANODE": {"Cu": 0.0003},
    }
    laboratory = {"Cu": "laboratory Cu", "Fe": "laboratory Fe", "S": "laboratory S"}
    found = [
        Instrument(
            tag=f"{stream} {quantity}",
            kind="assay",
            unit="%",
            stream=stream,
            quantity=quantity,
            basis="fraction",
            point=stream,
            analyte=quantity,
            stages=("provisional", "final") if stream == "CONC" else ("final",),
            low=0.0,
            high=100.0,
            uncertainty=Uncertainty(
                zero=0.005, sampling=0.8 * relative, preparation=0.36 * relative,
                analysis=0.48 * relative,
            ),
            shared=_shared(laboratory[quantity])
            if quantity in laboratory and stream not in ("BLISTER", "ANODE")
            else (),
            sampler=f"{stream} sampler",
        )
        for stream, quantities in samples.items()
        for quantity, relative in quantities.items()
    ]  # fmt: skip
    found += [
        Instrument(
            tag=f"{stream} H2O",
            kind="assay",
            unit="%",
            point=stream,
            analyte="moisture",
            low=0.0,
            high=30.0,
            uncertainty=Uncertainty(zero=0.15),
            shared=_shared("moisture oven"),
        )
        for stream in ("CONC", "CHARGE")
    ]
    found.append(
        Instrument(
            tag="ACID H2SO4",
            kind="assay",
            unit="%",
            point="ACID",
            analyte="H2SO4",
            low=90.0,
            high=100.0,
            uncertainty=Uncertainty(zero=0.05),
        )
    )
    return tuple(found)


def _surveys() -> tuple[Instrument, ...]:
    return (
        Instrument(
            tag="SHED volume",
            kind="survey",
            unit="m3",
            node="SHED",
            quantity="mass",
            analyte="volume",
            chain=(
                Step(by="density", tag="SHED density"),
                Step(by="moisture", tag="SHED H2O"),
            ),
            uncertainty=Uncertainty(zero=20.0, relative=0.01),
            shared=(),
        ),
        Instrument(
            tag="SHED density",
            kind="survey",
            unit="t/m3",
            analyte="density",
            uncertainty=Uncertainty(zero=0.01),
            shared=_shared("survey density"),
        ),
        Instrument(
            tag="SHED H2O",
            kind="survey",
            unit="%",
            analyte="moisture",
            uncertainty=Uncertainty(zero=0.2),
            shared=_shared("moisture oven"),
        ),
        *(
            Instrument(
                tag=f"SHED {quantity}",
                kind="survey",
                unit="%",
                node="SHED",
                quantity=quantity,
                basis="fraction",
                analyte=quantity,
                uncertainty=Uncertainty(zero=0.05, relative=0.01),
                shared=_shared(f"laboratory {quantity}") if quantity != "SiO2" else (),
            )
            for quantity in ("Cu", "Fe", "S", "SiO2")
        ),
    )
