"""Form of the body of ``POST /v1/budget``. Units and names are looked at later, in intake."""

from __future__ import annotations

from typing import Any

from marshmallow import ValidationError, validates_schema

from stagesum_schemas import records
from stagesum_schemas.base import RecordSchema
from stagesum_schemas.fields import (
    ByName,
    ListOf,
    Part,
    QuantityField,
    StrictBoolean,
    StrictInteger,
    StrictNumber,
    StrictText,
    UnitField,
    Word,
)

SAMPLING = ("auto", "plain")
EFFECTS = ("offset", "gain", "nonlinearity")
SHAPES = (
    "normal",
    "truncated_normal",
    "uniform",
    "triangular",
    "trapezoidal",
    "arcsine",
    "two_point",
    "student_t",
    "samples",
)
MOST_STAGES = 1000
MOST_SOURCES = 10_000  # of one stage; the service's own limit on all of them is lower
MOST_CONDITIONS = 100
MOST_VALUES = 1000
MOST_CORRELATIONS = 2000
FEWEST_TRIALS, MOST_TRIALS = 100, 10**9
MOST_READINGS = 10**6
HIGHEST_SEED = 2**63 - 1
# of a figure: where a source acts gives its unit, which for a standard's error is the input's
PLAIN = "A plain number is in the unit that closes there; for gain and nonlinearity it is a share"
HIGHEST_COVERAGE = 1.0 - 1e-9  # nearer to 1 the quantiles of a law without bounds are no longer meaningful


def readings_averaged() -> StrictInteger:
    """Make the field for a count of readings."""
    about = "Readings that are averaged; sources that vary by reading shrink accordingly"
    return StrictInteger(about, 1, MOST_READINGS, example=16, default=1)


class InputSchema(RecordSchema):
    """The measured quantity."""

    record = records.InputSpec
    unit = UnitField("Unit of the measured quantity", required=True, example="bar")
    values = ListOf(
        "Input values the chain is examined at",
        QuantityField("One input value. A plain number is in the input's unit", example="5 bar"),
        1,
        MOST_VALUES,
        required=True,
        example=[0, 5, 10],
    )
    full_scale = QuantityField(
        "Span that nonlinearity and of_span refer to. Default: of the values. A plain number is in the input's unit",
        example="10 bar",
    )


class ConditionSchema(RecordSchema):
    """A condition of use, such as temperature."""

    record = records.ConditionSpec
    nominal = QuantityField(
        "Value at which the condition has no effect. Its unit is the condition's in the answer; a plain number has none",
        required=True,
        example="25 degC",
    )
    values = ListOf(
        "Values the chain is examined at, each with every input value",
        QuantityField("One value. A plain number is in the unit of nominal", example="70 degC"),
        1,
        MOST_VALUES,
        required=True,
        example=["-20 degC", "25 degC", "70 degC"],
    )


class LawSchema(RecordSchema):
    """What a data sheet line says; a plain number is in the coherent unit of the place where it acts."""

    record = records.LawSpec
    typ = QuantityField(f"Typical figure, read as rules say. {PLAIN}", example="12 uV")
    min = QuantityField(f"Lower guaranteed limit, or the guaranteed rejection in dB. {PLAIN}", example="100 dB")
    max = QuantityField(f"Upper guaranteed limit. Alone it means +-max. {PLAIN}", example="50 uV")
    mean = QuantityField(f"Mean, where it isn't zero or the middle of the limits. {PLAIN}", example="1 uV")
    shape = Word("Shape of the distribution. Default: from the figures given", SHAPES, example="uniform")
    samples = ListOf(
        "Measured errors, drawn from as they are",
        QuantityField(f"One measured error. {PLAIN}", example="3 uV"),
        2,
        100_000,
        example=["-3 uV", "1 uV", "4 uV"],
    )
    dof = StrictNumber("Degrees of freedom of sigma", 0, inside=(False, True), example=9)
    top_ratio = StrictNumber("Trapezoidal shape: top width over base width", 0, 1, example=0.5, default=0.5)


class SourceSchema(LawSchema):
    """One error source of a stage."""

    record = records.SourceSpec
    name = StrictText("Name, unique in its stage", 1, 100, required=True, example="offset drift")
    effect = Word("What it changes: adds, scales, or bends the characteristic", EFFECTS, default="offset")
    at = Word("Where an offset is stated: at the stage's input or output", ("input", "output"), default="input")
    per = StrictText("Condition it grows with. The figures are per unit of it", 1, 100, example="temperature")
    law = Word("How it grows with the condition", ("linear", "sqrt", "square"), default="linear")
    times = QuantityField(
        "Constant beside the figures, such as a resistance beside a current. A plain number is a factor",
        example="350 ohm",
    )
    varies_by = Word("Fixed in a built unit, or new at every reading", ("unit", "reading"), default="unit")


class StageSchema(RecordSchema):
    """One stage of the chain."""

    record = records.StageSpec
    name = StrictText("Name, unique in the chain", 1, 100, without="/", required=True, example="amplifier")
    gain = QuantityField("Nominal gain, output over input. A plain number keeps the unit", required=True, example=100)
    unit = UnitField("Unit of the stage's output. Default: the one that closes", example="mV")
    full_scale = QuantityField(
        "Span of the output. Default: the input's carried through. A plain number is in the output's unit",
        example="2.5 V",
    )
    sources = ListOf(
        "Error sources", Part("One source", SourceSchema), 0, MOST_SOURCES, example=[{"name": "offset", "max": "50 uV"}]
    )


class CalibrationPointSchema(RecordSchema):
    """Where the chain is calibrated."""

    record = records.CalibrationPointSpec
    input = QuantityField("Input value. A plain number is in the input's unit", required=True, example=0)
    conditions = ByName(
        "Conditions that differ from nominal during calibration",
        QuantityField("Value of the condition. A plain number is in the unit of nominal", example="25 degC"),
        MOST_CONDITIONS,
        example={"temperature": "25 degC"},
    )


class StandardSchema(LawSchema):
    """Error of the calibration's standard, in the input's unit."""

    record = records.StandardSpec
    common = StrictBoolean("Whether both points share the same error", default=False)


class CalibrationSchema(RecordSchema):
    """One point takes the offset out, two take offset and gain out."""

    record = records.CalibrationSpec
    points = ListOf("Calibration points", Part("One point", CalibrationPointSchema), 1, 2, required=True)
    readings_averaged = readings_averaged()
    standard = Part("Error of the standard, in the input's unit. Default: none", StandardSchema)


class CorrelationSchema(RecordSchema):
    """Correlation of two sources."""

    record = records.CorrelationSpec
    between = ListOf(
        "The two sources, each stage/source",
        StrictText("A source", 3, 201, example="bridge/zero drift"),
        2,
        2,
        required=True,
        example=["bridge/span tolerance", "converter/reference"],
    )
    coefficient = StrictNumber("Correlation coefficient", -1, 1, required=True, example=0.5)


class LimitSchema(RecordSchema):
    """Permitted error at the referred node; the forms given add up."""

    record = records.LimitSpec
    min = QuantityField("Lower limit, beside max. A plain number is in the unit of the node", example="-0.009 bar")
    max = QuantityField(
        "Upper limit. Alone it means +-max. A plain number is in the unit of the node", example="0.009 bar"
    )
    of_span = QuantityField("Share of the span, a fraction or in %", example="0.1 %")
    of_reading = QuantityField("Share of the nominal reading, a fraction or in %", example="0.05 %")
    yield_ = StrictNumber(
        "Share of units that must be inside. Default: the coverage",
        0,
        1,
        inside=(False, False),
        data_key="yield",
        example=0.9998,
    )
    by = ListOf(
        "Methods that decide. Default: all asked for but the worst case",
        Word("A method", records.METHODS),
        1,
        len(records.METHODS),
        distinct=True,
        example=["monte_carlo"],
    )


class RulesSchema(RecordSchema):
    """How figures are read where a source doesn't say it itself."""

    record = records.RulesSpec
    typ_sigmas = StrictNumber("Sigmas that a typical figure stands for", 0, 10, inside=(False, True), default=1.0)
    max_sigmas = StrictNumber("Sigmas that a lone max stands for. Default: uniform", 0, 10, inside=(False, True))
    typ_covers = StrictNumber("Share of parts inside +-typ, in place of typ_sigmas", 0, 1, inside=(False, False))
    unbounded_sigmas = StrictNumber(
        "Sigmas taken as bound in the worst case where a source has no limits", 0, 20, inside=(False, True), default=3.0
    )


class MonteCarloSchema(RecordSchema):
    """How many trials."""

    record = records.MonteCarloSpec
    trials = StrictInteger("Number of trials", FEWEST_TRIALS, MOST_TRIALS, example=500_000)
    seed = StrictInteger("Seed: the same seed gives the same answer", 0, HIGHEST_SEED, default=1)
    adaptive = StrictBoolean("Go on until the results are stable (JCGM 101:2008, 7.9)", default=False)
    max_trials = StrictInteger("Where an adaptive run ends", FEWEST_TRIALS, MOST_TRIALS, default=10_000_000)
    refine = StrictBoolean("Make interval ends exact order statistics by a second pass over the trials", default=False)
    sampling = Word(
        "How a rare joint failure is estimated: auto (importance sampling where it is rare) or plain",
        SAMPLING,
        default="auto",
    )

    @validates_schema(skip_on_field_errors=False)
    def refuse_two_ways(self, data: dict[str, Any], **kwargs: Any) -> None:
        """Trials are fixed or found, not both."""
        if data.get("adaptive") and "trials" in data:
            raise ValidationError(
                "found trials beside adaptive: true, which finds their number; leave it out or set max_trials", "trials"
            )


class BudgetRequestSchema(RecordSchema):
    """One chain."""

    record = records.BudgetRequest
    title = StrictText("Title, repeated in the answer", 0, 200, example="Irrigation line pressure transmitter")
    input = Part("The measured quantity", InputSchema, required=True)
    conditions = ByName("Conditions of use", Part("One condition", ConditionSchema), MOST_CONDITIONS)
    stages = ListOf(
        "Stages from the measured quantity on", Part("One stage", StageSchema), 1, MOST_STAGES, required=True
    )
    calibration = Part("Calibration. Default: none", CalibrationSchema)
    correlations = ListOf(
        "Correlations. Default: independent", Part("One pair", CorrelationSchema), 0, MOST_CORRELATIONS
    )
    refer_to = StrictText("Where errors are told: input, output or a stage's name", 1, 100, default="output")
    limit = Part("Permitted error. Default: none, and no verdict", LimitSchema)
    rules = Part("How figures are read", RulesSchema)
    monte_carlo = Part("Settings of the simulation", MonteCarloSchema)
    readings_averaged = readings_averaged()
    methods = ListOf(
        "Methods to run. Default: all",
        Word("A method", records.METHODS),
        1,
        len(records.METHODS),
        distinct=True,
        example=list(records.METHODS),
    )
    coverage = StrictNumber(
        "Share of the distribution inside the interval. Default: 0.9973",
        0,
        HIGHEST_COVERAGE,
        inside=(False, True),
        example=0.9973,
    )
    coverage_factor = StrictNumber("Sigmas of rss, in place of coverage", 0, 10, inside=(False, True), example=2)

    @validates_schema(skip_on_field_errors=False)
    def refuse_two_coverages(self, data: dict[str, Any], **kwargs: Any) -> None:
        """The interval is stated once."""
        if "coverage" in data and "coverage_factor" in data:
            raise ValidationError("found coverage_factor beside coverage; write one of them", "coverage_factor")
