"""The dictionary of published tables and columns: name, unit, decimals, meaning.

Cells, documents, pages and SQL views are tested against it. A name ending in ``{q}`` stands for one
column a quantity of the site: ``measured_contained_Cu``. Amounts print the decimals of their
leaves (``recon.tabulate.rounding``); other columns the decimals given here.
"""

from __future__ import annotations

from dataclasses import dataclass

from recon.flowsheet.network import MASS
from recon.tabulate.rounding import PRECIOUS, leaf_decimals

BY_QUANTITY = -1
"""Decimals of an amount: those of its quantity's leaves."""
EACH = "{q}"


@dataclass(frozen=True, kw_only=True)
class Column:
    """
    One published column.

    Attributes
    ----------
    name : str
        Stable; ``{q}`` at its end stands for each component.
    title : str
        Head in documents, without the unit.
    unit : str
        ``t``, ``%``, ``-``; ``grade`` is % or g/t by component; blank for words.
    decimals : int
        For print; ``BY_QUANTITY`` for amounts.
    meaning : str
        Definition with the formula.
    """

    name: str
    title: str
    unit: str = "t"
    decimals: int = BY_QUANTITY
    meaning: str


@dataclass(frozen=True, kw_only=True)
class Table:
    """A published table: its stable name, title, what a row is, and its columns in order."""

    name: str
    title: str
    row: str
    columns: tuple[Column, ...]

    def column(self, name: str) -> Column:
        """
        Find the column a cell belongs to.

        Raises
        ------
        KeyError
            No column of that name is published.
        """
        for c in self.columns:
            if c.name == name:
                return c
        for c in self.columns:
            stem = c.name.removesuffix(EACH)
            if stem != c.name and name.startswith(stem):
                return c
        raise KeyError(f"table {self.name} has no column {name}")


def named(column: Column, quantity: str) -> str:
    """Fill the quantity into a column's name."""
    return column.name.replace(EACH, quantity)


def grade_unit(quantity: str) -> str:
    """Give the unit of a grade: g/t for precious metals, % for the rest."""
    return "g/t" if quantity in PRECIOUS else "%"


def decimals_of(column: Column, *, quantity: str = MASS, unit: str = "") -> int:
    """
    Give the decimals to print of a cell.

    Parameters
    ----------
    column : Column
    quantity : str
        Quantity of the row or column, for amounts.
    unit : str
        Unit of the cell, for grades.
    """
    if column.decimals != BY_QUANTITY:
        return column.decimals
    if column.unit == "grade":
        return 1 if unit == "g/t" else 3
    return leaf_decimals(quantity)


def _c(name: str, title: str, meaning: str, unit: str = "t", decimals: int = BY_QUANTITY) -> Column:
    return Column(name=name, title=title, unit=unit, decimals=decimals, meaning=meaning)


_BALANCE = (
    _c("opening_signed", "Opening, signed", "Last month's closing stock as printed there."),
    _c("opening_booked", "Booked to opening", "Stock lines of earlier months booked since."),
    _c("opening", "Opening stock", "opening_signed + opening_booked; at take-on the first survey."),
    _c("receipts", "In", "Sum of printed leaves that cross the boundary inwards, as measured."),
    _c("products", "Products out", "Sum of printed leaves of product streams, as measured."),
    _c("discards", "Other out", "Sum of printed leaves of every other stream out, as measured."),
    _c("stock_change", "Stock change", "closing - opening."),
    _c("closing", "Closing stock", "Survey rolled to the cut, approved corrections in."),
    _c(
        "unaccounted",
        "Unaccounted",
        "opening + receipts - products - discards - closing; positive: metal is missing.",
    ),
    _c("unaccounted_share", "Unaccounted, % of in", "100 x unaccounted / receipts.", "%", 2),
    _c(
        "z",
        "z",
        "unaccounted / its standard uncertainty; inside 2, carry and watch the running sum.",
        "-",
        2,
    ),
    _c(
        "investigate_beyond",
        "Investigate beyond",
        "2 x u: an unaccounted larger than this is not explained by chance at about 5 %.",
    ),
    _c(
        "loss_not_shown",
        "Loss that would not show",
        "(2 + 1.645) x u: a true loss smaller than this passes the limit of 2 u with more than "
        "5 % probability.",
    ),
    _c("running_months", "Months run", "Months in the running sum, at most twelve.", "-", 0),
    _c("running_unaccounted", "Unaccounted, running", "Sum of unaccounted over those months."),
    _c(
        "running_z",
        "z, running",
        "Running sum by its joint uncertainty: stocks between months cancel, sources that last "
        "add up.",
        "-",
        2,
    ),
    _c(
        "running_loss_not_shown",
        "Loss that would not show, running",
        "(2 + 1.645) x the running sum's u.",
    ),
    _c(
        "loss_not_shown_12",
        "Loss that would not show over twelve months",
        "(2 + 1.645) x u of a sum over twelve months measured as this one was.",
    ),
    _c("span_months", "Months of the span", "Where the opening was by difference.", "-", 0),
    _c(
        "span_unaccounted",
        "Unaccounted of the span",
        "Since the last boundary at which every place was surveyed or estimated; stated where the "
        "opening of this month was by difference.",
    ),
    _c("previous_month", "Unaccounted, month before", "As signed then."),
    _c("booked_earlier", "Unaccounted of earlier months, booked now", "Prior-period lines."),
    _c(
        "provisional_share",
        "Provisional share",
        "100 x part of in and out that rests on provisional or estimated values / in and out.",
        "%",
        1,
    ),
    _c(
        "planning_share",
        "Variance on planning values",
        "100 x share of unaccounted's variance from uncertainties that are planning values.",
        "%",
        1,
    ),
    _c("fitted_opening", "Opening stock, fitted", "The fit's opinion; never signed."),
    _c("fitted_receipts", "In, fitted", "Sum of printed fitted leaves."),
    _c("fitted_products", "Products out, fitted", "Sum of printed fitted leaves."),
    _c("fitted_discards", "Other out, fitted", "Sum of printed fitted leaves."),
    _c("fitted_closing", "Closing stock, fitted", "The fit's opinion; never signed."),
    _c(
        "fitted_imbalance",
        "Imbalance, fitted",
        "Of the printed fitted figures: rounding only, as the fit closes by construction.",
    ),
    _c("note", "Note", "What a reader must know of this row.", "", 0),
)

_MEASURED_BLOCK = (
    _c("measured_wet", "Wet, measured", "Sum of printed wet leaves, where a moisture applies."),
    _c("measured_moisture", "Moisture, measured", "100 x (1 - dry / wet).", "%", 2),
    _c("measured_dry", "Dry, measured", "Sum of printed dry leaves, as measured."),
    _c(
        "measured_grade_{q}",
        "Grade, measured",
        "contained / dry of the printed figures.",
        "grade",
    ),
    _c("measured_contained_{q}", "Contained, measured", "Sum of measured dry mass x assay."),
    _c(
        "provisional_share",
        "Provisional share",
        "100 x part of the leading metal (dry mass where none) on provisional or estimated values.",
        "%",
        1,
    ),
)
_FITTED_BLOCK = (
    _c("fitted_dry", "Dry, fitted", "Sum of printed fitted leaves."),
    _c("fitted_grade_{q}", "Grade, fitted", "contained / dry of the printed figures.", "grade"),
    _c("fitted_contained_{q}", "Contained, fitted", "Sum of printed fitted leaves."),
)

TABLES: tuple[Table, ...] = (
    Table(
        name="site-balance",
        title="Site metal balance, as measured",
        row="component",
        columns=_BALANCE,
    ),
    Table(
        name="section-balance",
        title="Balance by section, as measured",
        row="section and quantity",
        columns=_BALANCE,
    ),
    Table(
        name="unaccounted-bridge",
        title="Unaccounted: as read, corrections, stated",
        row="boundary, component and step",
        columns=(
            _c("effect", "Effect", "Change of unaccounted by this step."),
            _c("unaccounted", "Unaccounted", "After this step, before rounding of leaves."),
            _c("step", "Step", "What was decided, by whom, why.", "", 0),
        ),
    ),
    Table(
        name="streams",
        title="Streams",
        row="stream",
        columns=(
            _c("from", "From", "Node it leaves; site boundary where blank.", "", 0),
            _c("to", "To", "Node it enters.", "", 0),
            _c("role", "Role", "receipt, product, discard or internal.", "", 0),
            *_MEASURED_BLOCK,
            *_FITTED_BLOCK,
        ),
    ),
    Table(
        name="measured-reconciled",
        title="Measured against reconciled",
        row="instrument",
        columns=(
            _c("measured", "Measured", "Sum of amounts, or mean of fractions.", "", 4),
            _c("reconciled", "Reconciled", "The same of the fit.", "", 4),
            _c("adjustment", "Adjustment", "reconciled - measured.", "", 4),
            _c("adjustment_share", "Adjustment", "100 x adjustment / measured.", "%", 2),
            _c(
                "adjustment_z",
                "Adjustment / its u",
                "Adjustment by the root of u before squared less u after squared.",
                "-",
                2,
            ),
            _c(
                "standardised",
                "T",
                "Residual of the reading's own error by its standard deviation; positive reads "
                "high. Days only.",
                "-",
                2,
            ),
            _c("readings", "Readings", "How many measurements it is made of.", "-", 0),
            _c(
                "word", "Can it be checked", "held; can or cannot be checked; compared only.", "", 0
            ),
        ),
    ),
    Table(
        name="node-closure",
        title="Node closure",
        row="node and quantity",
        columns=(
            _c(
                "raw_imbalance",
                "Raw imbalance",
                "in - out - stock change as measured; positive: missing behind the node.",
            ),
            _c("z", "z", "raw_imbalance / its standard uncertainty.", "-", 2),
            _c("reconciled_imbalance", "Reconciled imbalance", "Of the fit: 0 but for solving."),
        ),
    ),
    Table(
        name="stocks",
        title="Stocks",
        row="place and quantity",
        columns=(
            _c("method", "Method", "surveyed, estimated, rolled by difference, take-on.", "", 0),
            _c("time", "Time", "How far the survey was rolled to the cut.", "", 0),
            _c("document", "Documents", "Evidence of the closing: survey and samples.", "", 0),
            _c(
                "surveyed",
                "As counted",
                "Before its conversion: volume, wet mass or pieces; unit in the cell.",
                "",
                1,
            ),
            _c("moisture", "Moisture", "Applied to the wet mass counted.", "%", 2),
            _c("opening_signed", "Opening, signed", "Last month's closing as printed."),
            _c("opening_booked", "Booked to opening", "Stock lines of earlier months."),
            _c("opening", "Opening", "opening_signed + opening_booked."),
            _c("closing", "Closing", "What is signed."),
            _c("change", "Change", "closing - opening, with the covariance of both."),
            _c("closing_grade", "Grade", "contained / dry of the printed closing.", "grade"),
            _c("fitted_opening", "Opening, fitted", "The fit's opinion."),
            _c("fitted_closing", "Closing, fitted", "The fit's opinion; never signed."),
            _c("fitted_difference", "Fitted less signed", "fitted_closing - closing."),
        ),
    ),
    Table(
        name="recoveries",
        title="Production and recovery",
        row="figure",
        columns=(
            _c("measured", "Measured head", "As measured: of / over.", "", 2),
            _c(
                "built_up",
                "Built-up head",
                "As measured: of / (all out + stock change) of the part between head and product; "
                "closes by construction and hides bias.",
                "",
                2,
            ),
            _c(
                "two_product",
                "Two-product",
                "100 x c (f - t) / (f (c - t)) of measured grades, where one feed makes one "
                "product and one tailing.",
                "",
                2,
            ),
            _c("fitted", "Fitted", "Of the reconciled amounts.", "", 2),
            _c("fitted_less_measured", "Fitted less measured", "Difference.", "", 2),
        ),
    ),
    Table(
        name="tests",
        title="Tests of the data",
        row="what is tested",
        columns=(
            _c(
                "p_value",
                "p-value",
                "Chance of residuals this large together, if every stated uncertainty holds.",
                "-",
                4,
            ),
            _c("degrees_of_freedom", "Degrees of freedom", "Of that test.", "-", 0),
            _c("largest", "Largest single test", "Largest |T| of the period.", "-", 2),
            _c("limit", "Its limit", "At the site's false-alarm rate.", "-", 2),
            _c("alarm", "Alarm", "raised or not, or why there is no test.", "", 0),
        ),
    ),
    Table(
        name="residues",
        title="Rounding residues",
        row="table and row",
        columns=(
            _c(
                "residue_{q}",
                "Residue",
                "Printed total less the unrounded one; {q} is the column it belongs to.",
                "t",
                6,
            ),
        ),
    ),
)
TABLE: dict[str, Table] = {table.name: table for table in TABLES}
