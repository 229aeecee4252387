"""What a test is judged by, fixed when its sheet is opened: range, transfer, tolerances, rule, point list, head."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cache
from typing import TYPE_CHECKING, Any, Self

from calibration.records.canonical import plain

if TYPE_CHECKING:
    from calibration.metrology.pointlist import PointList
    from calibration.metrology.signal import Signal
    from calibration.metrology.tolerance import Tolerance
    from calibration.metrology.verdicts import DecisionRule
    from calibration.models import Record, Requirement, Sheet
    from register.models import MeasuringHead, Range


@dataclass(frozen=True, slots=True)
class StatedTolerance:
    """A tolerance as its requirement states it; figures stay as typed."""

    form: str
    percent: str = ""
    amount: str = ""
    unit: str = ""

    def in_unit(self, unit: str) -> Tolerance:
        """The tolerance for the arithmetic, its input figure in the unit of the range.

        Raises
        ------
        ValueError
            A figure is missing or not a number.
        """
        from calibration.metrology.tolerance import Tolerance
        from register.engineering.typed import parse_number

        amount = 0.0
        if self.amount:
            amount = parse_number(self.amount)
            if self.unit and self.unit != unit:
                from register.engineering.units import convert_difference

                amount = float(convert_difference(amount, self.unit, unit))
        return Tolerance.stated(self.form, percent=parse_number(self.percent) if self.percent else 0.0, amount=amount)


@dataclass(frozen=True, slots=True)
class Basis:
    """The terms of one test, as they stood.

    `decimal_comma` says how readings are typed: "1,234" is then 1.234. `notes` holds whatever else is kept with the
    test (identification, cautions, checklist …): texts, whole numbers, lists and objects of them.
    """

    head_id: int
    lrv: str
    urv: str
    unit: str
    reference: str
    mpe: StatedTolerance
    as_left: StatedTolerance | None = None
    transfer: str = "linear"
    low_cut_percent: float = 0.0
    below_cut: str = "linear"
    rule: str = "simple acceptance"
    points: str = ""
    decimal_comma: bool = False
    notes: Mapping[str, Any] = field(default_factory=dict)

    @classmethod
    def of(
        cls,
        *,
        used: Range,
        requirement: Requirement,
        head: MeasuringHead,
        decimal_comma: bool = False,
        notes: Mapping[str, Any] | None = None,
    ) -> Self:
        """The basis that a range, a requirement (its `point_list` loaded) and a measuring head give."""
        left = None
        if requirement.as_left_percent or requirement.as_left_input:
            left = StatedTolerance(
                requirement.mpe_form,
                requirement.as_left_percent,
                requirement.as_left_input,
                requirement.input_unit,
            )
        return cls(
            head_id=head.pk,
            lrv=used.lrv,
            urv=used.urv,
            unit=used.unit,
            reference=used.reference,
            transfer=used.transfer,
            low_cut_percent=used.low_cut_percent,
            below_cut=used.below_cut,
            mpe=StatedTolerance(
                requirement.mpe_form, requirement.mpe_percent, requirement.mpe_input, requirement.input_unit
            ),
            as_left=left,
            rule=requirement.decision_rule,
            points=requirement.point_list.points,
            decimal_comma=decimal_comma,
            notes=dict(notes or {}),
        )

    @classmethod
    def read(cls, row: Sheet | Record, head_id: int) -> Self:
        """The basis kept on a sheet or a record."""
        kept = dict(row.basis)
        mpe = StatedTolerance(**kept.pop("mpe"))
        left = kept.pop("as_left", None)
        return cls(
            head_id=head_id,
            lrv=row.lrv,
            urv=row.urv,
            unit=row.unit,
            reference=row.reference,
            transfer=row.transfer,
            low_cut_percent=row.low_cut_percent,
            below_cut=row.below_cut,
            mpe=mpe,
            as_left=StatedTolerance(**left) if left else None,
            rule=kept.pop("rule"),
            points=kept.pop("points"),
            decimal_comma=kept.pop("decimal_comma") == "yes",
            notes=kept,
        )

    def columns(self) -> dict[str, Any]:
        """Column values of a sheet or a record; the SI figures are worked out here.

        Raises
        ------
        ValueError
            LRV or URV is not a number, or the unit is unknown.
        """
        from register.engineering.typed import parse_number
        from register.engineering.units import to_si

        return {
            "lrv": self.lrv,
            "urv": self.urv,
            "unit": self.unit,
            "reference": self.reference,
            "lrv_si": float(to_si(parse_number(self.lrv), self.unit)),
            "urv_si": float(to_si(parse_number(self.urv), self.unit)),
            "transfer": self.transfer,
            "low_cut_percent": self.low_cut_percent,
            "below_cut": self.below_cut,
            "basis": self.kept(),
        }

    def kept(self) -> dict[str, Any]:
        """What goes into the JSON column: texts and whole numbers only."""
        kept: dict[str, Any] = dict(plain(self.notes))
        kept["mpe"] = _stated(self.mpe)
        if self.as_left is not None:
            kept["as_left"] = _stated(self.as_left)
        kept["rule"] = str(self.rule)
        kept["points"] = self.points
        kept["decimal_comma"] = plain(self.decimal_comma)
        return kept

    def signal(self) -> Signal:
        """The configured range for the arithmetic; its unit is the one a reader sees."""
        from calibration.metrology.signal import BelowCut, Signal, Transfer
        from register.engineering.typed import parse_number
        from register.engineering.units import label

        return Signal(
            lrv=parse_number(self.lrv),
            urv=parse_number(self.urv),
            transfer=Transfer(self.transfer),
            low_cut_percent=self.low_cut_percent,
            below_cut=BelowCut(self.below_cut),
            unit=label(self.unit),
        )

    def tolerance(self, kind: str) -> Tolerance:
        """MPE for an as-found run; as-left tolerance, where one is stated, for an as-left run."""
        stated = self.as_left if kind == "as-left" and self.as_left is not None else self.mpe
        return stated.in_unit(self.unit)

    def decision_rule(self) -> DecisionRule:
        from calibration.metrology.verdicts import DecisionRule, Rule

        return DecisionRule(kind=Rule(self.rule))

    def point_list(self) -> PointList | None:
        """The inputs asked for; None where none are stated (past tests of days without a list)."""
        return _parsed(self.points) if self.points else None


@cache
def _parsed(points: str) -> PointList:
    from calibration.metrology.pointlist import PointList

    return PointList.parse(points)


def _stated(stated: StatedTolerance) -> dict[str, str]:
    return {"form": str(stated.form), "percent": stated.percent, "amount": stated.amount, "unit": stated.unit}
