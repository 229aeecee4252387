"""Tests and their signed, unalterable content.

`Test` is the mutable head. Everything else here but `RunFigures` and `ChainHead` is frozen: the database
refuses to change or delete it. `RunFigures` can be recomputed from the readings at any time.
"""

from __future__ import annotations

from django.db import models

from calibration.models.sheet import Sheet
from calibration.models.standard import Certificate, Standard
from register.models import Fitting, Frozen, MeasuringHead, Plant, Tag, Transmitter


class Verdict(models.TextChoices):
    PASS = "pass", "pass"
    CONDITIONAL_PASS = "conditional pass", "conditional pass"
    CONDITIONAL_FAIL = "conditional fail", "conditional fail"
    FAIL = "fail", "fail"
    NOT_DECIDABLE = "not decidable", "not decidable"
    INCOMPLETE = "incomplete", "incomplete"


class Test(models.Model):
    """One visit to one transmitter; points at the version of its record that counts."""

    __test__ = False  # not a test case, whatever pytest thinks of the name

    class State(models.TextChoices):
        SIGNED = "signed", "signed"
        REVIEWED = "reviewed", "reviewed"
        SENT_BACK = "sent back", "sent back"
        TRANSCRIBED = "transcribed", "transcribed, unsigned"

    class Outcome(models.TextChoices):
        DONE = "done", "tested"
        NOT_TESTED = "could not be tested", "could not be tested"

    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="tests")
    tag = models.ForeignKey(Tag, on_delete=models.PROTECT, null=True, related_name="tests")
    transmitter = models.ForeignKey(Transmitter, on_delete=models.PROTECT, related_name="tests")
    fitting = models.ForeignKey(Fitting, on_delete=models.PROTECT, null=True, related_name="tests")
    sheet = models.OneToOneField(Sheet, on_delete=models.PROTECT, null=True, related_name="test")
    current_record = models.OneToOneField("calibration.Record", on_delete=models.PROTECT, null=True, related_name="+")
    state = models.CharField(max_length=12, choices=State.choices)
    outcome = models.CharField(max_length=20, choices=Outcome.choices, default=Outcome.DONE)
    tested_on = models.DateField(help_text="Plant date of the last reading.")
    adjusted = models.BooleanField(default=False)
    accepted = models.BooleanField(
        default=False, help_text="Complete, signed or transcribed, not sent back, its last run inside its limit."
    )
    as_found_verdict = models.CharField(max_length=20, choices=Verdict.choices, blank=True)
    as_left_verdict = models.CharField(max_length=20, choices=Verdict.choices, blank=True)
    as_found_worst = models.FloatField(null=True, help_text="Signed error at the worst reading, % of output span.")
    as_left_worst = models.FloatField(null=True)
    as_found_ratio = models.FloatField(null=True, help_text="Signed worst error in multiples of the MPE.")
    as_left_ratio = models.FloatField(
        null=True, help_text="As that of as-found in multiples of the MPE, though judged by the as-left tolerance."
    )

    class Meta:
        ordering = ["-tested_on", "-id"]
        indexes = [
            models.Index(fields=["plant", "-tested_on", "-id"], name="test_by_plant"),
            models.Index(fields=["plant", "state", "-tested_on", "-id"], name="test_by_state"),
            models.Index(fields=["plant", "as_found_verdict", "-tested_on", "-id"], name="test_by_verdict"),
            models.Index(fields=["tag", "-tested_on", "-id"], name="test_by_tag"),
            models.Index(fields=["transmitter", "-tested_on", "-id"], name="test_by_transmitter"),
        ]

    def __str__(self) -> str:
        return f"{self.tag or self.transmitter} {self.tested_on}"


class Record(Frozen):
    """The unalterable content of one version of a test, chained to the record before it in the plant."""

    test = models.ForeignKey(Test, on_delete=models.PROTECT, related_name="records")
    version = models.PositiveSmallIntegerField(default=1)
    supersedes = models.OneToOneField("self", on_delete=models.PROTECT, null=True, related_name="superseded_by")
    correction_reason = models.CharField(max_length=300, blank=True)
    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="records")
    position = models.PositiveBigIntegerField()
    previous_hash = models.CharField(max_length=64)
    hash = models.CharField(max_length=64)
    transcribed = models.BooleanField(default=False)
    made_by = models.ForeignKey("register.User", on_delete=models.PROTECT, null=True, related_name="+")
    made_at = models.DateTimeField()
    head = models.ForeignKey(MeasuringHead, on_delete=models.PROTECT, related_name="+")
    lrv = models.CharField(max_length=40)
    urv = models.CharField(max_length=40)
    unit = models.CharField(max_length=20)
    reference = models.CharField(max_length=12)
    lrv_si = models.FloatField()
    urv_si = models.FloatField()
    transfer = models.CharField(max_length=12)
    low_cut_percent = models.FloatField(default=0.0)
    below_cut = models.CharField(max_length=8, default="linear")
    # The long columns come last: SQLite then reads the others without them.
    basis = models.JSONField()
    answers = models.JSONField(
        default=dict, help_text="Confirmation, cautions, adjustment, checklist, remarks as typed."
    )
    content = models.TextField(help_text="RFC 8785 form of everything above: strings and whole numbers only.")

    class Meta:
        ordering = ["plant", "-position"]
        constraints = [
            models.UniqueConstraint(fields=["plant", "position"], name="record_position_once_per_plant"),
            models.UniqueConstraint(fields=["test", "version"], name="record_version_once_per_test"),
        ]

    def __str__(self) -> str:
        return f"record {self.position} of {self.plant}"


class Run(Frozen):
    """One series of readings of a record."""

    class Kind(models.TextChoices):
        AS_FOUND = "as-found", "as-found"
        AS_LEFT = "as-left", "as-left"

    record = models.ForeignKey(Record, on_delete=models.PROTECT, related_name="runs")
    kind = models.CharField(max_length=8, choices=Kind.choices)
    tested_on = models.DateField()
    ambient = models.CharField(max_length=40, blank=True)
    ambient_unit = models.CharField(max_length=20, blank=True)
    height_difference = models.CharField(max_length=40, blank=True)
    height_unit = models.CharField(max_length=20, blank=True)
    static_pressure = models.CharField(max_length=40, blank=True)
    static_unit = models.CharField(max_length=20, blank=True)

    class Meta:
        ordering = ["record", "kind"]
        constraints = [models.UniqueConstraint(fields=["record", "kind"], name="run_kind_once_per_record")]

    def __str__(self) -> str:
        return f"{self.kind} of {self.record}"


class Reading(Frozen):
    """One applied input and the output measured with it, as typed and in SI."""

    run = models.ForeignKey(Run, on_delete=models.PROTECT, related_name="readings")
    order = models.PositiveSmallIntegerField()
    cycle = models.PositiveSmallIntegerField(default=1)
    direction = models.CharField(max_length=4, choices=[("up", "up"), ("down", "down")])
    nominal_percent = models.FloatField(null=True)
    applied = models.CharField(max_length=40)
    applied_unit = models.CharField(max_length=20)
    applied_si = models.FloatField()
    measured = models.CharField("measured output", max_length=40)
    measured_unit = models.CharField(max_length=20, default="mA")
    measured_ma = models.FloatField()
    digital = models.CharField("digital or control-system value", max_length=40, blank=True)
    digital_unit = models.CharField(max_length=20, blank=True)
    digital_si = models.FloatField(null=True)
    entered_at = models.DateTimeField(null=True)

    class Meta:
        ordering = ["run", "order"]
        constraints = [models.UniqueConstraint(fields=["run", "order"], name="reading_order_once_per_run")]

    def __str__(self) -> str:
        return f"{self.applied} {self.applied_unit} → {self.measured} {self.measured_unit}"


class StandardUse(Frozen):
    """Which standard, under which certificate, applied the input or measured the output of a run."""

    class Part(models.TextChoices):
        APPLIED = "applied", "applied the input"
        MEASURED = "measured", "measured the output"

    run = models.ForeignKey(Run, on_delete=models.PROTECT, related_name="standards")
    part = models.CharField(max_length=8, choices=Part.choices)
    standard = models.ForeignKey(Standard, on_delete=models.PROTECT, related_name="uses")
    certificate = models.ForeignKey(Certificate, on_delete=models.PROTECT, null=True, related_name="uses")
    exception = models.CharField(
        max_length=300, blank=True, help_text="Who allowed a lapsed certificate to be used, and why."
    )
    exception_by = models.ForeignKey("register.User", on_delete=models.PROTECT, null=True, related_name="+")

    class Meta:
        ordering = ["run", "part"]
        constraints = [models.UniqueConstraint(fields=["run", "part", "standard"], name="standard_use_once")]

    def __str__(self) -> str:
        return f"{self.standard} {self.part} in {self.run}"


class Signature(Frozen):
    """Who stands for a record, in which sense, and when; a link of the plant's chain like the record itself."""

    class Meaning(models.TextChoices):
        PERFORMED = "performed", "performed the test"
        REVIEWED = "reviewed", "reviewed the record"
        SENT_BACK = "sent back", "sent the record back"

    record = models.ForeignKey(Record, on_delete=models.PROTECT, related_name="signatures")
    meaning = models.CharField(max_length=10, choices=Meaning.choices)
    person = models.ForeignKey("register.User", on_delete=models.PROTECT, related_name="signatures")
    printed_name = models.CharField(max_length=120)
    signed_at = models.DateTimeField()
    time_zone = models.CharField(max_length=60)
    remarks = models.CharField(max_length=300, blank=True)
    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="signatures")
    position = models.PositiveBigIntegerField(help_text="Counted together with the records of the plant.")
    content = models.TextField(help_text="RFC 8785 form of everything above and the hash of the record.")
    previous_hash = models.CharField(max_length=64)
    hash = models.CharField(max_length=64)

    class Meta:
        ordering = ["signed_at", "id"]
        constraints = [
            models.UniqueConstraint(fields=["record", "meaning", "person"], name="signature_once_per_meaning"),
            models.UniqueConstraint(fields=["plant", "position"], name="signature_position_once_per_plant"),
        ]

    def __str__(self) -> str:
        return f"{self.printed_name} {self.get_meaning_display()} {self.signed_at:%Y-%m-%d}"


class RunFigures(models.Model):
    """What the arithmetic says of a run; recomputable, kept so that lists and drift read one row a run.

    Errors, shifts and limits are in % of output span unless the column says otherwise.
    """

    run = models.OneToOneField(Run, on_delete=models.PROTECT, primary_key=True, related_name="figures")
    method_version = models.PositiveSmallIntegerField()
    plant = models.ForeignKey(Plant, on_delete=models.PROTECT, related_name="+")
    transmitter = models.ForeignKey(Transmitter, on_delete=models.PROTECT, related_name="+")
    tag = models.ForeignKey(Tag, on_delete=models.PROTECT, null=True, related_name="+")
    test = models.ForeignKey(Test, on_delete=models.PROTECT, related_name="figures")
    current = models.BooleanField(default=True, help_text="Belongs to the version of the record that counts.")
    kind = models.CharField(max_length=8, choices=Run.Kind.choices)
    tested_on = models.DateField()
    verdict = models.CharField(max_length=20, choices=Verdict.choices)
    why = models.CharField(max_length=400)
    complete = models.BooleanField(
        help_text="Nothing is missing or undecided, and no point is known from one side only."
    )
    worst = models.FloatField(null=True)
    worst_ratio = models.FloatField(null=True)
    zero_error = models.FloatField(null=True)
    span_error = models.FloatField(null=True)
    zero_shift = models.FloatField(null=True)
    span_shift = models.FloatField(null=True)
    hysteresis = models.FloatField(null=True)
    repeatability = models.FloatField(null=True)
    non_linearity = models.FloatField(null=True, help_text="Independent.")
    point_errors = models.JSONField(default=list, help_text="Pairs of nominal percent and mean error there.")

    class Meta:
        verbose_name_plural = "figures of runs"
        indexes = [
            models.Index(fields=["transmitter", "tested_on", "kind"], name="figures_by_transmitter"),
            models.Index(fields=["tag", "tested_on", "kind"], name="figures_by_tag"),
        ]

    def __str__(self) -> str:
        return f"figures of {self.run_id}"


class ChainHead(models.Model):
    """The last link of a plant's chain; locked while a record is added."""

    plant = models.OneToOneField(Plant, on_delete=models.PROTECT, primary_key=True, related_name="chain")
    position = models.PositiveBigIntegerField(default=0)
    hash = models.CharField(max_length=64, default="0" * 64)

    def __str__(self) -> str:
        return f"chain of {self.plant_id} at {self.position}"
