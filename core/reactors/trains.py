"""Reactors one after the other, with what happens to the stream between them."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace

import numpy as np

from core.arrays import FloatArray
from core.errors import Amount, Fact, Fault, Note, Refused, refuse
from core.reactors.balances import Balances
from core.reactors.energetics import Outcome, energetics_of
from core.reactors.march.marching import Work
from core.reactors.mixing import at_temperature, heated, mixed, sensible_duty
from core.reactors.observed import Fed, Observer
from core.reactors.problem import (
    ApproachTarget,
    Isothermal,
    MixStage,
    PlugFlow,
    ReactorProblem,
    ReactorStage,
    SeparateStage,
    Size,
    SpeciesTarget,
    Stage,
    Target,
    TemperatureStage,
    Train,
)
from core.reactors.reacted import Reacted, StageReached
from core.reactors.scanning import first_size
from core.reactors.solving import basis_of, fed_of, run, size_for
from core.reactors.tank.sizing_tanks import tank_scale
from core.reactors.telling import assumptions, outlet_of, remarks, tell
from core.reactors.yields import yields_of
from core.streams.stream import Stream

METHOD = "stage by stage"
_BESIDES = ("mix", "cool", "heat", "separate")
_OF_THE_WHOLE = ("yield-factor-missing", "denominator-near-zero")
"""Told of the train and not of each of its reactors."""
_NO_RISE = Note(
    "heat-not-known",
    "no adiabatic rise of the conversion reached is given: streams join or leave between the"
    " stages, so that what would be heated is not one stream; each stage has its own temperatures."
    " That of complete conversion is of the feed alone",
    subject=("feed",),
)


@dataclass(frozen=True, eq=False)
class _At:
    """A place between two stages.

    Attributes
    ----------
    stream : Stream
    fed : Fed
        Up to there.
    extents : ndarray, shape (R,)
    reached : tuple of StageReached
    reacted : tuple of Reacted
        Of the reactors.
    """

    stream: Stream
    fed: Fed
    extents: FloatArray
    reached: tuple[StageReached, ...] = ()
    reacted: tuple[Reacted, ...] = ()


def run_train(problem: ReactorProblem, points: int, work: Work) -> Reacted:
    """Return a train whose reactors all have a size, at work.

    Raises
    ------
    Refused
        As each stage.
    """
    train = _train(problem)
    return _told(problem, _through(problem, train.stages, _start(problem), points, work))


def size_train(problem: ReactorProblem, target: Target, points: int, work: Work) -> Reacted:
    """Return a train at work whose one reactor without a size meets the target.

    Raises
    ------
    Refused
        ``train-sizes``: not exactly one is without. As each stage.
    """
    train = _train(problem)
    open_ = [
        k
        for k, stage in enumerate(train.stages)
        if isinstance(stage, ReactorStage) and stage.reactor.size is None
    ]
    if len(open_) != 1:
        raise refuse(
            "train-sizes",
            ("reactor", "stages"),
            "{count} reactors of the train are without a size; the size of exactly one is found:"
            " leave it out there, and state it of the others",
            count=len(open_),
        )
    k = open_[0]
    before = _through(problem, train.stages[:k], _start(problem), points, work)
    stage, rest = train.stages[k], train.stages[k + 1 :]
    assert isinstance(stage, ReactorStage)
    inside = _inside(problem, stage, before.stream)
    if all(isinstance(s, TemperatureStage) for s in rest) and _of_composition(target):
        course = size_for(inside, target, before.fed, work)
        return _told(
            problem,
            _through(
                problem,
                rest,
                _after(problem, stage, before, tell(inside, course, points)),
                points,
                work,
            ),
        )
    basis = basis_of(inside)

    def stages(size: float) -> tuple[Stage, ...]:
        return (replace(stage, reactor=replace(stage.reactor, size=Size(basis, size))), *rest)

    def at(size: float) -> tuple[float, float]:
        end = _through(problem, stages(size), before, None, work)
        return gap_at(problem, end.stream, end.fed, target), size

    found = first_size(at, tank_scale(inside, basis))
    if found is None:
        raise Refused(
            [
                Fault(
                    "target-out-of-reach",
                    ("target",),
                    "no size of the reactor {stage} meets the target at the end of the train; ask"
                    " for less, or change the other stages",
                    {"stage": stage.id},
                )
            ]
        )
    return _told(problem, _through(problem, stages(found), before, points, work))


def end_of_train(problem: ReactorProblem, work: Work) -> tuple[Stream, Fed]:
    """Return what leaves a train whose reactors all have a size, and what was fed to it."""
    end = _through(problem, _train(problem).stages, _start(problem), None, work)
    return end.stream, end.fed


def gap_at(problem: ReactorProblem, stream: Stream, fed: Fed, target: Target) -> float:
    """Return what is zero where a stream meets a target.

    Parameters
    ----------
    problem : ReactorProblem
    stream : Stream
    fed : Fed
        Up to there; what is consumed counts the stream's own key as not reacted.
    target : Target
    """
    still = replace(problem, reactor=PlugFlow(), thermal=Isothermal(), feed=stream)
    balances = Balances(still, "volume", stream)
    gap = Observer(balances, fed).gap(target).on_floats()
    return gap(0.0, balances.start().tolist())[0]


def _of_composition(target: Target) -> bool:
    """Whether heating and cooling leave a target as it is."""
    if isinstance(target, SpeciesTarget):
        return target.quantity != "concentration"
    return not isinstance(target, ApproachTarget)


def _train(problem: ReactorProblem) -> Train:
    assert isinstance(problem.reactor, Train)
    return problem.reactor


def _start(problem: ReactorProblem) -> _At:
    return _At(problem.feed, fed_of(problem), np.zeros(len(problem.laws)))


def _inside(problem: ReactorProblem, stage: ReactorStage, stream: Stream) -> ReactorProblem:
    return replace(problem, reactor=stage.reactor, thermal=stage.thermal, feed=stream)


def _through(
    problem: ReactorProblem, stages: tuple[Stage, ...], at: _At, points: int | None, work: Work
) -> _At:
    """Go through stages; without a number of points nothing is told of the reactors."""
    for stage in stages:
        try:
            at = _pass(problem, stage, at, points, work)
        except Refused as refused:
            raise Refused([_in_stage(fault, stage.id) for fault in refused.faults]) from None
    return at


def _in_stage(fault: Fault, stage: str) -> Fault:
    """Return a fault that says in which stage it arose."""
    if "in_stage" in fault.facts:
        return fault
    facts: dict[str, Fact] = {**fault.facts, "in_stage": stage}
    return Fault(fault.code, fault.subject, "in the stage {in_stage}: " + fault.detail, facts)


def _pass(problem: ReactorProblem, stage: Stage, at: _At, points: int | None, work: Work) -> _At:
    where = ("reactor", "stages", stage.id)
    if isinstance(stage, ReactorStage):
        inside = _inside(problem, stage, at.stream)
        course = run(inside, at.fed, work)
        if points is None:
            stream = outlet_of(course)
            return replace(at, stream=stream, fed=_fed_after(problem, at, stream))
        return _after(problem, stage, at, tell(inside, course, points))
    key = problem.key
    if isinstance(stage, MixStage):
        stream = mixed(problem, [at.stream, stage.stream], where)
        fed = Fed(at.fed.flows + stage.stream.flows, at.fed.consumed)
        return _other(at, stage.id, "mix", stream, fed, key, None)
    if isinstance(stage, TemperatureStage):
        if stage.temperature is not None:
            stream = at_temperature(problem, at.stream, stage.temperature, where)
            duty = sensible_duty(problem, at.stream, stream, where)
        else:
            assert stage.duty is not None
            stream, duty = heated(problem, at.stream, where, stage.duty), stage.duty
        before, after = at.stream.temperature, stream.temperature
        turned_out = "heat" if (after or 0.0) > (before or 0.0) else "cool"
        return _other(at, stage.id, stage.kind or turned_out, stream, at.fed, key, duty)
    assert isinstance(stage, SeparateStage)
    taken = at.stream.flows * stage.removed
    share = _share_kept(at.stream, taken)
    stream = replace(
        at.stream,
        flows=at.stream.flows - taken,
        liquid_volumetric_flow=share,
    )
    removed = replace(
        at.stream,
        flows=taken,
        liquid_volumetric_flow=None
        if share is None or at.stream.liquid_volumetric_flow is None
        else at.stream.liquid_volumetric_flow - share,
    )
    made = _other(at, stage.id, "separate", stream, at.fed, key, None)
    last = replace(made.reached[-1], removed=removed)
    return replace(made, reached=(*made.reached[:-1], last))


def _share_kept(stream: Stream, taken: FloatArray) -> float | None:
    """Return the volumetric flow of a liquid of which some was taken out, by moles."""
    volume = stream.liquid_volumetric_flow
    if volume is None:
        return None
    inside = stream.in_phase
    total = float(stream.flows[inside].sum())
    return float(volume) * (1.0 - float(taken[inside].sum()) / total) if total else float(volume)


def _other(
    at: _At, id_: str, kind: str, stream: Stream, fed: Fed, key: int, duty: float | None
) -> _At:
    conversion = fed.consumed / float(fed.flows[key])
    stage = StageReached(id=id_, kind=kind, outlet=stream, conversion=conversion, duty=duty)
    return replace(at, stream=stream, fed=fed, reached=(*at.reached, stage))


def _fed_after(problem: ReactorProblem, at: _At, outlet: Stream) -> Fed:
    gone = float(at.stream.flows[problem.key] - outlet.flows[problem.key])
    return Fed(at.fed.flows, at.fed.consumed + gone)


def _after(problem: ReactorProblem, stage: ReactorStage, at: _At, reacted: Reacted) -> _At:
    fed = _fed_after(problem, at, reacted.outlet)
    told = StageReached(
        id=stage.id,
        kind=stage.reactor.kind,
        outlet=reacted.outlet,
        conversion=reacted.conversion,
        volume=reacted.volume,
        catalyst_mass=reacted.catalyst_mass,
        length=reacted.length,
        duty=None if reacted.heat is None else reacted.heat.duty,
        rate=reacted.key_rate,
        by_catalyst_mass=reacted.by_catalyst_mass,
        profile=reacted.profile,
        steady_states=reacted.steady_states,
    )
    extents = at.extents
    if reacted.extents is not None:
        extents = extents + reacted.extents
    return _At(reacted.outlet, fed, extents, (*at.reached, told), (*at.reacted, reacted))


def _backwards(stages: tuple[StageReached, ...]) -> Iterator[Note]:
    """Say where a cooler would have to heat, or a heater to cool."""
    for stage in stages:
        sign = {"cool": -1.0, "heat": 1.0}.get(stage.kind)
        if sign is None or stage.duty is None or not stage.duty * sign < 0:
            continue
        does = "supply" if stage.kind == "cool" else "remove"
        yield Note(
            "exchanger-works-backwards",
            f"the {'cooler' if stage.kind == 'cool' else 'heater'} {{stage}} would have to {does}"
            " {duty} to bring what comes to it to its temperature; check that temperature and the"
            " stage before",
            "warning",
            ("reactor", "stages", stage.id),
            {"stage": stage.id, "duty": Amount(abs(stage.duty), "power")},
        )


def _told(problem: ReactorProblem, end: _At) -> Reacted:
    """Return the whole train at work."""
    independent = problem.reactions.rank == len(problem.reactions.nu)
    mixes = any(stage.kind in ("mix", "separate") for stage in end.reached)
    found = energetics_of(problem, Outcome(end.stream, end.extents))
    yields, of_yields = yields_of(problem, end.extents, float(end.fed.flows[problem.key]))
    heat = found.heat
    counted = [stage.duty for stage in end.reached if stage.kind not in ("mix", "separate")]
    if heat is not None:
        known = all(d is not None for d in counted)
        heat = replace(
            heat,
            duty=float(sum(d for d in counted if d is not None)) if known else None,
            adiabatic_rise=None if mixes else heat.adiabatic_rise,
        )
    times = [r.mean_residence_time for r in end.reacted]
    volumes = [r.volume for r in end.reacted]
    masses = [r.catalyst_mass for r in end.reacted]
    notes: dict[tuple[object, ...], Note] = {}
    for each in end.reacted:
        for note in each.notes:
            if note.code in _OF_THE_WHOLE:
                continue
            notes.setdefault((note.code, note.detail, note.subject), note)
    other = [_NO_RISE] if mixes and heat is not None else []
    other += [*of_yields, *_backwards(end.reached), *remarks(problem, end.stream)]
    for note in (*found.notes, *other):
        notes.setdefault((note.code, note.detail, note.subject), note)
    ids = [stage.id for stage in end.reached if stage.kind not in _BESIDES]
    hot = [
        replace(r.hottest, stage=id_)
        for id_, r in zip(ids, end.reacted, strict=True)
        if r.hottest is not None
    ]
    volume = None if None in volumes else float(sum(v for v in volumes if v is not None))
    v0 = problem.feed.volumetric_flow
    return Reacted(
        inlet=problem.feed,
        outlet=end.stream,
        conversion=end.fed.consumed / float(end.fed.flows[problem.key]),
        extents=end.extents if independent else None,
        yields=yields,
        volume=volume,
        catalyst_mass=None if None in masses else float(sum(m for m in masses if m is not None)),
        space_time=None if volume is None or v0 is None else volume / float(v0),
        mean_residence_time=None
        if None in times or mixes
        else float(sum(t for t in times if t is not None)),
        key_rate=end.reacted[-1].key_rate if end.reacted else None,
        by_catalyst_mass=end.reacted[-1].by_catalyst_mass if end.reacted else False,
        hottest=max(hot, key=lambda h: h.temperature) if hot else None,
        heat=heat,
        equilibrium=found.equilibrium,
        stages=end.reached,
        properties=found.properties,
        method=METHOD + ": " + "; ".join(dict.fromkeys(r.method for r in end.reacted)),
        evaluations=sum(r.evaluations for r in end.reacted),
        notes=tuple(notes.values()),
        assumed=tuple({(n.code, n.detail): n for r in end.reacted for n in r.assumed}.values())
        or assumptions(
            problem, Balances(replace(problem, reactor=PlugFlow()), "volume", problem.feed)
        ),
    )
