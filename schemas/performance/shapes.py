"""The shape of a performance answer: each sample, the period, the trend of the activity."""

from __future__ import annotations

from marshmallow import fields

from schemas.fields import Map, describe
from schemas.results import (
    NumberSchema,
    OpenSchema,
    TableSchema,
    envelope,
    number,
    numbers_by_name,
)

MOST_NAMES = 1000


class CountsSchema(OpenSchema):
    """How many samples are of each quality."""

    good = fields.Integer(required=True)
    uncertain = fields.Integer(
        required=True,
        metadata=describe("With an account, though a reading was missing or left out."),
    )
    bad = fields.Integer(required=True, metadata=describe("Running, and without an account."))
    not_running = fields.Integer(required=True, data_key="not-running")


class HoursSchema(OpenSchema):
    """The hours of the period, by what the reactor did in them."""

    running = number("Settled and running: these alone count in the means.", required=True)
    settling = number("Running, within the time that it takes to settle.", required=True)
    stopped = number(required=True)
    unknown_ = number(
        "Of samples that do not tell whether it ran, and of gaps.",
        data_key="unknown",
        required=True,
    )


class TrendSchema(OpenSchema):
    """A straight line through a column over the period, by least squares."""

    slope = number("Per day.", required=True)
    significant = fields.Boolean(
        required=True, metadata=describe("The slope is beyond its interval from zero.")
    )


class ObservedSchema(OpenSchema):
    """What is told of a column of the caller's own, which nothing else counts."""

    mean = number("By time.", required=True)
    trend = fields.Nested(TrendSchema, required=True, allow_none=True)
    least = number(required=True)
    most = number(required=True)
    samples = fields.Integer(required=True)


class MeansSchema(OpenSchema):
    """Means over the settled running hours, each by the weight that belongs to it.

    Their uncertainty has a random part, which shrinks with the number of samples,
    and what is constant over the series, which does not.
    """

    conversion = number("By key fed: key converted over key fed.", required=True)
    overall_conversion = number("With a recycle: by key in the fresh feed.")
    yields = numbers_by_name(text="By product; by key fed.")
    selectivities = numbers_by_name(text="By product; by key converted.")
    closures = numbers_by_name(text="By element; by what is fed of it.")
    temperature = numbers_by_name(text="By the pointer of each temperature that is read; by time.")
    activity = number("By time; where the data sheet has a rate.")
    observed = Map(
        fields.Nested(ObservedSchema),
        at_least=0,
        at_most=MOST_NAMES,
        metadata=describe("Columns of the caller's own."),
    )


class MadeSchema(OpenSchema):
    """What was made in some hours."""

    amount = number(required=True)
    mass = number(required=True)
    hours = number(required=True)


class ProductionSchema(OpenSchema):
    """Net production of a substance."""

    measured = fields.Nested(
        MadeSchema, required=True, metadata=describe("In the hours of samples with an account.")
    )
    gap_filled = fields.Nested(
        MadeSchema,
        required=True,
        allow_none=True,
        metadata=describe(
            "With the running hours between that have none, at the mean of the nearest samples on"
            " both sides; its hours are those of both."
        ),
    )


class LossesSchema(OpenSchema):
    """Key not converted that the design kinetics would have converted, and what it would be."""

    key = number("Below zero: more was converted than expected.", required=True)
    products = numbers_by_name(text="By product, at the selectivity of the period.")
    hours = number("Of samples with an expected conversion.", required=True)


class EpisodeSchema(OpenSchema):
    """A stretch of samples beyond a limit, one after the other."""

    from_ = fields.String(
        data_key="from", required=True, metadata=describe("UTC.", format="date-time")
    )
    to = fields.String(required=True, metadata=describe("UTC.", format="date-time"))
    hours = number(required=True)
    worst = number("Farthest beyond the limit, with its uncertainty.", required=True)
    probability = fields.Float(
        required=True,
        allow_none=True,
        metadata=describe("That the worst truly lies beyond the limit, given its uncertainty."),
    )


class ExceedanceSchema(OpenSchema):
    """A limit of the data sheet that was exceeded."""

    limit = fields.String(
        required=True,
        metadata=describe("The reading, by its JSON Pointer, or the name of the result."),
    )
    side = fields.String(required=True, metadata=describe("", enum=["low", "high"]))
    bound = number("The limit itself.", required=True)
    hours = number(required=True)
    certain_hours = number(
        "Of these, beyond the limit by more than 1.645 standard uncertainties.", required=True
    )
    episodes = fields.List(
        fields.Nested(EpisodeSchema), required=True, metadata=describe("The longest, at most 100.")
    )
    episodes_total = fields.Integer(required=True)


class InstrumentSchema(OpenSchema):
    """What the account says of one reading over the period."""

    reading = fields.String(required=True, metadata=describe("Its JSON Pointer."))
    bias = number(
        "Constant error that explains its residuals best, of the whole period, or of a named"
        " reading from 'from' on; null where no other reading checks it."
    )
    test = fields.Float(
        required=True, allow_none=True, metadata=describe("The bias over its uncertainty.")
    )
    limit = fields.Float(
        required=True,
        allow_none=True,
        metadata=describe("Of the test: exceeded by chance once in 200 periods by any reading."),
    )
    significant = fields.Boolean(required=True)
    from_ = fields.String(
        data_key="from",
        required=True,
        allow_none=True,
        metadata=describe("UTC; of a reading named, since when.", format="date-time"),
    )
    to = fields.String(
        required=True,
        allow_none=True,
        metadata=describe("UTC; of a reading named, until when.", format="date-time"),
    )
    cannot_be_told_apart = fields.List(
        fields.String(),
        required=True,
        metadata=describe("Readings whose constant error would explain the same."),
    )
    smallest_detectable = number(
        "Constant error over the whole period that is named nine times in ten."
    )
    hours = number("In which it was used.", required=True)
    left_out = numbers_by_name(text="Hours left out, by reason.")


class WithoutSuspectsSchema(OpenSchema):
    """The period with the readings in doubt left out."""

    removed = fields.List(
        fields.String(),
        required=True,
        metadata=describe("The first of each set that cannot be told apart."),
    )
    means = fields.Nested(MeansSchema, required=True)
    production = Map(
        fields.Nested(ProductionSchema),
        at_least=0,
        at_most=MOST_NAMES,
        required=True,
        metadata=describe("By product."),
    )


class KeySchema(OpenSchema):
    """The key over the period."""

    fed = number(required=True)
    converted = number(required=True)


class PeriodSchema(OpenSchema):
    """What the series comes to."""

    from_ = fields.String(
        data_key="from", required=True, allow_none=True, metadata=describe("", format="date-time")
    )
    to = fields.String(required=True, allow_none=True, metadata=describe("", format="date-time"))
    samples = fields.Nested(CountsSchema, required=True)
    hours = fields.Nested(HoursSchema, required=True)
    means = fields.Nested(MeansSchema, required=True)
    key = fields.Nested(KeySchema, required=True)
    production = Map(
        fields.Nested(ProductionSchema),
        at_least=0,
        at_most=MOST_NAMES,
        required=True,
        metadata=describe("By product, net."),
    )
    losses = fields.Nested(
        LossesSchema,
        required=True,
        allow_none=True,
        metadata=describe("Null where the data sheet has no rate to expect anything by."),
    )
    exceedances = fields.List(fields.Nested(ExceedanceSchema), required=True)
    hours_outside_limits = number("Of any limit.", required=True)
    instruments = fields.List(fields.Nested(InstrumentSchema), required=True)
    suspects = fields.List(
        fields.List(fields.String()),
        required=True,
        metadata=describe("Readings with a significant bias; those of one list look alike."),
    )
    without_suspects = fields.Nested(
        WithoutSuspectsSchema, metadata=describe("Where there are suspects.")
    )
    conversion_at_reference = number(
        "At the reference conditions of the data sheet, with the activity of the last week."
    )


class CrossingSchema(OpenSchema):
    """When a limit will be reached, as things go."""

    limit = number(required=True)
    of = fields.String(
        required=True,
        metadata=describe("", enum=["activity", "conversion_at_reference"]),
    )
    date = fields.String(required=True, metadata=describe("UTC.", format="date-time"))
    interval = fields.List(
        fields.String(allow_none=True),
        required=True,
        metadata=describe("Its two ends, UTC; null: later than can be told."),
    )


class ModelSchema(OpenSchema):
    """One model of decline that was tried."""

    model = fields.String(
        required=True,
        metadata=describe("", enum=["constant", "linear", "exponential", "hyperbolic"]),
    )
    information_criterion = fields.Float(required=True, allow_none=True)


class ActivityTrendSchema(OpenSchema):
    """The decline of the activity over the time on stream of one charge."""

    campaign = fields.Integer(required=True, metadata=describe("Counted from 0."))
    model = fields.String(
        required=True,
        metadata=describe("", enum=["constant", "linear", "exponential", "hyperbolic"]),
    )
    parameters = numbers_by_name(text="Of the model.")
    models = fields.List(
        fields.Nested(ModelSchema), required=True, metadata=describe("Those tried.")
    )
    samples = fields.Integer(required=True)
    crosses = fields.Nested(
        CrossingSchema,
        required=True,
        allow_none=True,
        metadata=describe("The limit that comes first; null with a note that says why."),
    )


class TrendsSchema(ActivityTrendSchema):
    """The decline of the charge that is in, and of those before it."""

    earlier = fields.List(
        fields.Nested(ActivityTrendSchema), metadata=describe("Of the charges before.")
    )


class PerformanceResult(OpenSchema):
    """Each sample, the period, and the trend."""

    samples = fields.Nested(
        TableSchema,
        required=True,
        metadata=describe(
            "Columns: time (as sent), time_utc, hours, state, quality, flags, missing, reason,"
            " campaign, time_on_stream, conversion and conversion_u, extent.<id>, yield.<product>,"
            " selectivity.<product>, closure.<element>, fed.<key>, made.<product>, chi_square,"
            " p_value, suspects, exceeded; where the data sheet allows also approach,"
            " expected_conversion, activity, activity_u, pressure_drop, pressure_drop_over_clean,"
            " conversion_at_reference, and observed.<name>."
        ),
    )
    period = fields.Nested(PeriodSchema, required=True)
    activity_trend = fields.Nested(
        TrendsSchema,
        allow_none=True,
        metadata=describe("Where the data sheet has a rate; null with a note that says why."),
    )


PerformanceAnswer = envelope("PerformanceAnswer", PerformanceResult)

__all__ = ["NumberSchema", "PerformanceAnswer", "PerformanceResult"]
