"""Form of the answer of ``POST /v1/budget`` and of problem details, for the reference; mirrors the answer records."""

from __future__ import annotations

from typing import Any

from stagesum_schemas import records
from stagesum_schemas.base import RecordSchema
from stagesum_schemas.fields import ByName, ListOf, Part, StrictBoolean, StrictInteger, StrictNumber, StrictText, Word

OUTCOMES = ("pass", "fail", "undecided")


def number(about: str, **options: Any) -> StrictNumber:
    """Make the field for a number that is always there."""
    return StrictNumber(about, required=True, **options)


def text(about: str) -> StrictText:
    """Make the field for text that is always there."""
    return StrictText(about, required=True)


def texts(about: str) -> ListOf:
    """Make the field for a list of sentences or names."""
    return ListOf(about, StrictText("One of them"), required=True)


class IntervalSchema(RecordSchema):
    """A closed interval."""

    record = records.Interval
    lower = number("Lower end, in the answer's unit")
    upper = number("Upper end, in the answer's unit")


class WorstCaseSchema(RecordSchema):
    """Extremes with every source inside its bounds."""

    record = records.WorstCase
    lower = number("Smallest error of the exact chain, in the answer's unit")
    upper = number("Largest error of the exact chain, in the answer's unit")
    first_order = Part("The same from the first-order sum", IntervalSchema, required=True)


class RssSchema(RecordSchema):
    """Law of propagation (JCGM 100)."""

    record = records.Rss
    mean = number("Mean error, in the answer's unit")
    sigma = number("Standard deviation, in the answer's unit")
    coverage_factor = number("Half-width of the interval in sigmas")
    lower = number("Lower end of the interval, in the answer's unit")
    upper = number("Upper end of the interval, in the answer's unit")
    cut = StrictBoolean("Whether the worst case cuts the interval", required=True)
    dof = StrictNumber("Effective degrees of freedom. Absent: infinite")
    yield_ = StrictNumber("Expected share inside the limit", data_key="yield")
    outside_ppm = StrictNumber("Expected share outside the limit, in ppm")
    cp = StrictNumber("Capability Cp: width of the limit over six sigma")
    cpk = StrictNumber("Capability Cpk: distance of the mean to the nearer limit over three sigma")


class PointMonteCarloSchema(RecordSchema):
    """Simulation of the exact chain at one point (JCGM 101)."""

    record = records.PointMonteCarlo
    mean = number("Mean error, in the answer's unit")
    sigma = number("Standard deviation, in the answer's unit")
    lower = number("Lower end of the probabilistically symmetric interval, in the answer's unit")
    upper = number("Upper end of the probabilistically symmetric interval, in the answer's unit")
    shortest = Part("Shortest interval of the same coverage", IntervalSchema, required=True)
    yield_ = StrictNumber("Share of trials inside the limit", data_key="yield")
    yield_interval = ListOf("95 % interval of the yield (Clopper and Pearson)", StrictNumber("An end"), 2, 2)


class PointConvolutionSchema(RecordSchema):
    """Exact law of the first-order error at one point."""

    record = records.PointConvolution
    mean = number("Mean error, in the answer's unit")
    sigma = number("Standard deviation, in the answer's unit")
    lower = number("Lower end of the probabilistically symmetric interval, in the answer's unit")
    upper = number("Upper end of the probabilistically symmetric interval, in the answer's unit")
    shortest = Part("Shortest interval of the same coverage, where it is found quickly", IntervalSchema)
    yield_ = StrictNumber("Expected share inside the limit", data_key="yield")
    outside_ppm = StrictNumber("Expected share outside the limit, in ppm")


class PointSchema(RecordSchema):
    """One operating point."""

    record = records.Point
    input = number("Input value, in the input's unit")
    conditions = ByName("Conditions, each in the unit of its nominal value", number("Value"), 100, required=True)
    nominal = number("Nominal signal at the referred node, in the answer's unit")
    limit = Part("Permitted error here", IntervalSchema)
    worst_case = Part("Worst case", WorstCaseSchema)
    rss = Part("Root sum of squares", RssSchema)
    monte_carlo = Part("Monte Carlo", PointMonteCarloSchema)
    convolution = Part("Convolution", PointConvolutionSchema)


class HistogramSchema(RecordSchema):
    """Simulated errors at the governing point."""

    record = records.Histogram
    edges = ListOf("Edges of the bins, in the answer's unit", StrictNumber("An edge"), required=True)
    counts = ListOf("Trials in each bin", StrictInteger("A count", 0), required=True)


class MonteCarloAnswerSchema(RecordSchema):
    """Simulation over all points on the same draws."""

    record = records.MonteCarlo
    trials = StrictInteger("Trials made", required=True)
    seed = StrictInteger("Seed used", required=True)
    histogram = Part("Errors at the governing point", HistogramSchema, required=True)
    adaptive = StrictBoolean("Whether the number of trials was found by the run")
    converged = StrictBoolean("Whether an adaptive run became stable")
    tolerance = StrictNumber("Tolerance of an adaptive run, in the answer's unit")
    joint_yield = StrictNumber("Share of units inside the limit at every point")
    joint_yield_interval = ListOf(
        "95 % interval of the joint yield (plain counting: Clopper and Pearson)", StrictNumber("An end"), 2, 2
    )
    sampling = Word("How the joint yield was estimated", ("importance", "plain"))
    effective_trials = StrictNumber("Plain trials that would tell the joint yield as well")


class LargestSchema(RecordSchema):
    """Where a source contributes most."""

    record = records.Largest
    point = StrictInteger("Position in points, from 0", 0, required=True)
    bound = number("First-order bound there, in the answer's unit")
    sigma = number("Contribution to sigma there, in the answer's unit")


class ContributionSchema(RecordSchema):
    """One source at the governing point."""

    record = records.Contribution
    stage = text("Stage")
    source = text("Source")
    effect = text("What it changes")
    shape = text("Shape of its distribution")
    source_unit = text("Unit of mean, sigma and bounds")
    mean = number("Mean of the source, in source_unit")
    sigma = number("Standard deviation of the source, in source_unit")
    bounds = ListOf("Bounds of the source, in source_unit", StrictNumber("A bound"), 2, 2, required=True)
    reading = text("How the data sheet line was read")
    varies_by = text("unit or reading")
    sensitivity = number("Error at the referred node over the source, in the answer's unit over source_unit")
    bound = number("First-order bound, in the answer's unit")
    bound_share = number("Share of the sum of all bounds")
    contribution_sigma = number("Contribution to sigma, in the answer's unit")
    variance_share = number("Share of the variance; with correlations it may be negative")
    largest = Part("Point where its bound is largest", LargestSchema, required=True)


class VariancePartsSchema(RecordSchema):
    """Shares of the variance at the governing point."""

    record = records.VarianceParts
    unit = number("Share that is fixed in a built unit")
    reading = number("Share that is new at every reading")


class VerdictSchema(RecordSchema):
    """Verdict of each method, and the one that counts."""

    record = records.Verdict
    overall = Word("Verdict of the methods in by", OUTCOMES, required=True)
    by = texts("Methods that decide")
    yield_ = number("Share of units that must be inside", data_key="yield")
    worst_case = Word("Verdict of the worst case", OUTCOMES)
    rss = Word("Verdict of rss", OUTCOMES)
    monte_carlo = Word("Verdict of Monte Carlo", OUTCOMES)
    convolution = Word("Verdict of convolution", OUTCOMES)


class ChecksSchema(RecordSchema):
    """Whether the simple method holds (JCGM 101:2008, 8.2)."""

    record = records.Checks
    rss_against = text("Method that rss is compared with")
    tolerance = number("Permitted difference of interval ends, in the answer's unit")
    largest_difference = number("Largest difference found, in the answer's unit")
    point = StrictInteger("Point where it was found, from 0", 0, required=True)
    detail = text("The result in a sentence")
    rss_holds = StrictBoolean("Whether rss holds. Absent: too few trials to tell")


class ServiceSchema(RecordSchema):
    """Who answered."""

    record = records.Service
    name = text("Name of the service")
    version = text("Version of the service")
    contract = text("Version of the contract")


class BudgetSchema(RecordSchema):
    """The answer; numbers are in its unit where nothing else is said."""

    record = records.Budget
    title = text("Title of the request")
    service = Part("Who answered", ServiceSchema, required=True)
    refer_to = text("Where errors are told")
    unit = text("Unit of all errors and limits")
    points = ListOf("Operating points", Part("One point", PointSchema), required=True)
    governing_point = StrictInteger("Point with the largest error relative to its limit, from 0", 0, required=True)
    contributions = ListOf(
        "Sources, the largest share of variance first", Part("One source", ContributionSchema), required=True
    )
    variance_parts = Part("Fixed and varying shares of the variance", VariancePartsSchema, required=True)
    assumptions = texts("What was assumed because it wasn't stated")
    cautions = texts("What the answer is not")
    coverage = number("Share of the distribution inside the intervals")
    span = StrictNumber("Span at the referred node, in the answer's unit. Absent: zero")
    monte_carlo = Part("The simulation as a whole", MonteCarloAnswerSchema)
    verdict = Part("Verdict. Absent: no limit was given", VerdictSchema)
    checks = Part("Does the simple method hold", ChecksSchema)


class FaultSchema(RecordSchema):
    """One fault of a body."""

    record = records.Fault
    pointer = StrictText("Where: RFC 6901 pointer as URI fragment", required=True, example="#/stages/1/sources/0/max")
    detail = text("What was found and what would be right")


class ProblemSchema(RecordSchema):
    """Problem details (RFC 9457)."""

    record = records.Problem
    type = text("URI of the kind of problem; about:blank where the status says it all")
    title = text("Name of the status")
    status = StrictInteger("HTTP status", required=True, example=422)
    detail = text("What is wrong, in a sentence")
    errors = ListOf("All faults of the body", Part("One fault", FaultSchema))
