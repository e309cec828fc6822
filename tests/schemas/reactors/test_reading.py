"""Reading reactor requests: what the core is asked, and what is refused, where."""

from __future__ import annotations

import math

import pytest
from numpy.testing import assert_allclose

from core.reactors.problem import (
    Adiabatic,
    ApproachTarget,
    Batch,
    ConversionTarget,
    Exchange,
    Isothermal,
    MaximumTarget,
    MixStage,
    PackedBed,
    RecyclePlugFlow,
    SeparateStage,
    Size,
    SpeciesTarget,
    TanksInSeries,
    TemperatureStage,
    Train,
)
from schemas.reactors import operating_point, rating, volume
from schemas.shape import MeaningError, ShapeError
from tests.schemas.reactors.requests import (
    BED,
    CLEAN_BED,
    EXCHANGE,
    RATINGS,
    STAGES,
    sized,
)
from tests.support import changed

TANK = RATINGS["stirred-tank"]
POINT = changed(TANK, target={"conversion": 0.8}, free="temperature", between=["40 degC", "350 K"])


def rated(name, **places):
    return rating.read(changed(RATINGS[name], **places))[0].problem


def faults(read, document):
    with pytest.raises((MeaningError, ShapeError)) as refused:
        read(document)
    return {(fault.code, fault.place) for fault in refused.value.faults}


@pytest.mark.parametrize("name", RATINGS)
def test_every_kind_is_read(name):
    problem = rated(name)
    assert problem.reactor.kind == RATINGS[name]["reactor"]["kind"]
    assert len(problem.laws) == len(problem.constants) == len(problem.reactions.reactions)


def test_each_reaction_has_its_own_rate():
    laws = rated("plug-flow").laws
    assert_allclose(laws[0].constant.at(333.15), 0.31 / 60)
    assert_allclose(laws[1].constant.at(None), 0.05 / 60)
    assert laws[0].orders.tolist() == [1, 0, 0]
    assert laws[1].orders.tolist() == [0, 1, 0]
    # Neither needs 'of', because each equation has coefficients of one alone.
    assert [law.of for law in laws] == [0, 1]


def test_tanks_recycle_and_size():
    tanks = rated("tanks-in-series").reactor
    assert tanks == TanksInSeries(3, Size("volume", 3.0))
    recycle = rated("recycle-plug-flow").reactor
    assert recycle == RecyclePlugFlow(2.5, Size("volume", 3.0))


def test_a_bed_in_si():
    bed = rated("clean-bed").reactor
    assert isinstance(bed, PackedBed)
    assert bed.size == Size("volume", 32.0)
    assert_allclose(
        [bed.bulk_density, bed.cross_section, bed.particle_diameter, bed.void_fraction,
         bed.viscosity],
        [600, 38, 0.008, 0.42, 3.7e-5],
    )  # fmt: skip
    clean = bed.clean_bed
    normal = 46000 / 3600 / 0.022413969545014137
    molar_mass = (205 * 64.066 + 220 * 31.998 + 1620 * 28.014) / 2045e3
    assert_allclose(clean.molar_mass, molar_mass, rtol=2e-4)
    assert_allclose(clean.mass_flow, normal * clean.molar_mass, rtol=1e-12)
    assert_allclose([clean.pressure_drop, clean.temperature], [2200, 703.15])
    assert_allclose(clean.pressure, 26000 + 101325)


def test_a_particle_by_volume_over_surface_and_tubes_by_diameter():
    other = {
        "reactor__particle_diameter": ...,
        "reactor__particle_volume": "2 mm3",
        "reactor__particle_surface": "6 mm2",
        "reactor__cross_section": ...,
        "reactor__tube_diameter": "25 mm",
        "reactor__tubes": 5000,
    }
    bed = rated("packed-bed", **other).reactor
    assert_allclose(bed.particle_diameter, 2e-3)
    assert_allclose(bed.cross_section, math.pi / 4 * 0.025**2)
    assert bed.tubes == 5000


def test_what_particles_and_meters_are_measured_in_is_not_what_the_answer_is():
    document = changed(RATINGS["clean-bed"], reactor__clean_bed__pressure="14.7 psi")
    _, edge = rating.read(document)
    assert edge.scales["length"].unit == "m"
    assert edge.scales["pressure"].unit == "barg"
    assert edge.scales["pressure_difference"].unit == "bar"


def test_a_fed_batch():
    batch = rated("fed-batch").reactor
    assert isinstance(batch, Batch)
    assert batch.size == Size("time", 3 * 3600.0)
    assert batch.fed.until == 2 * 3600
    assert not batch.fed.stream.batch
    assert_allclose(batch.fed.stream.flows[0], 8000 * 1.2 / 3600)
    assert_allclose(batch.fed.stream.liquid_volumetric_flow, 1.2 / 3600)
    assert batch.fed.stream.temperature == 293.15
    endless = rated("fed-batch", reactor__fed__duration=...)
    assert endless.reactor.fed.until == math.inf


def test_a_train():
    train = rated("train").reactor
    assert isinstance(train, Train)
    first, cooler, second, shot, warm, absorber, last = train.stages
    assert isinstance(first.thermal, Adiabatic)
    assert isinstance(second.thermal, Adiabatic)  # that of the request
    assert cooler == TemperatureStage("cooler", 713.15, None, "cool")
    assert warm == TemperatureStage("warm", None, 500e3, "heat")
    assert isinstance(shot, MixStage)
    names = rated("train").reactions.names
    assert_allclose(shot.stream.flows[names.index("O2")], 40 / 3.6)
    assert isinstance(absorber, SeparateStage)
    assert absorber.removed.tolist() == [0.995 if name == "SO3" else 0 for name in names]
    assert last.reactor.size == Size("volume", 10.0)
    duty = changed(STAGES[1], to=..., duty="2 MW")
    assert rated("train", reactor__stages__1=duty).reactor.stages[1].duty == -2e6


def test_what_only_a_mixed_stream_holds_is_a_substance_of_the_account():
    stream = {"phase": "gas", "temperature": "60 degC", "flows": {"Ar": "4 kmol/h"}}
    assert "Ar" in rated("train", reactor__stages__3__stream=stream).reactions.names


@pytest.mark.parametrize(
    ("said", "made"),
    [
        ({"mode": "isothermal"}, Isothermal()),
        ({"mode": "isothermal", "temperature": "80 degC"}, Isothermal(353.15)),
        ({"mode": "adiabatic"}, Adiabatic()),
        (EXCHANGE, Exchange(25e3, 313.15, 60e3, "counter-current")),
        (
            changed(EXCHANGE, arrangement=..., utility_heat_capacity_flow=...),
            Exchange(25e3, 313.15),
        ),
    ],
)
def test_thermal_modes(said, made):
    assert rated("plug-flow", thermal=said).thermal == made


def test_left_out_it_is_isothermal():
    assert rated("plug-flow").thermal == Isothermal()


@pytest.mark.parametrize(
    ("said", "made"),
    [
        ({"conversion": "80 %"}, ConversionTarget(0.8)),
        ({"species": "R", "concentration": "1 kmol/m3"}, SpeciesTarget(1, "concentration", 1e3)),
        ({"species": "R", "flow": "3.6 kmol/h"}, SpeciesTarget(1, "flow", 1.0)),
        ({"species": "R", "flow": "216 kg/h"}, SpeciesTarget(1, "flow", 1.0)),
        ({"species": "R", "mole_fraction": 0.2}, SpeciesTarget(1, "mole_fraction", 0.2)),
        ({"species": "R", "yield": 0.5}, SpeciesTarget(1, "yield", 0.5)),
        ({"species": "R", "yield": 0.5, "per_key": 2}, SpeciesTarget(1, "yield", 0.25)),
        ({"species": "S", "yield": 0.5, "per_key": 1}, SpeciesTarget(2, "yield", 0.5)),
        ({"species": "R", "maximum": True}, MaximumTarget(1)),
    ],
)
def test_targets(said, made):
    question, _ = volume.read(sized("plug-flow", said))
    assert question.target.__class__ is made.__class__
    found, wanted = vars(question.target), vars(made)
    assert found.keys() == wanted.keys()
    for name, value in wanted.items():
        assert found[name] == (pytest.approx(value) if isinstance(value, float) else value)


def test_an_approach_names_its_reaction_where_there_are_several():
    question, _ = volume.read(sized("packed-bed", {"approach": "10 K"}))
    assert question.target == ApproachTarget(10.0, 0)
    found = faults(volume.read, sized("plug-flow", {"approach": "10 K"}))
    assert found == {("field-needed", "/target/reaction")}
    found = faults(volume.read, sized("plug-flow", {"approach": "10 K", "reaction": "first"}))
    assert found == {("field-needed", "/reactions/0/equilibrium_constant")}
    found = faults(volume.read, sized("packed-bed", {"approach": "10 degC"}))
    assert found == {("unit-not-allowed", "/target/approach")}
    found = faults(volume.read, sized("packed-bed", {"approach": "10 K", "reaction": "x"}))
    assert found == {("unknown-reaction", "/target/reaction")}


@pytest.mark.parametrize(
    ("said", "fault"),
    [
        ({"species": "R"}, ("target-form", "/target")),
        ({"species": "R", "maximum": False}, ("target-form", "/target")),
        ({"species": "R", "maximum": True, "flow": "1 mol/s"}, ("target-form", "/target")),
        ({"species": "X", "flow": "1 mol/s"}, ("unknown-substance", "/target/species")),
        ({"species": "S", "yield": 0.5}, ("field-needed", "/target/per_key")),
        ({"species": "A", "yield": 0.5}, ("field-needed", "/target/per_key")),
        (
            {"species": "R", "flow": "1 mol/s", "per_key": 1},
            ("field-not-used", "/target/per_key"),
        ),
    ],
)
def test_targets_that_are_refused(said, fault):
    assert faults(volume.read, sized("plug-flow", said)) == {fault}


@pytest.mark.parametrize(
    ("free", "between", "low", "high", "per", "unit"),
    [
        ("temperature", ["350 K", "40 degC"], 313.15, 350.0, 1.0, "K"),
        ("feed-rate", ["18 kmol/h", "36 kmol/h"], 5.0, 10.0, 1.0, "kmol/h"),
        ("feed-rate", ["1080 kg/h", "2.16 t/h"], 5.0, 10.0, 0.06, "kg/h"),
        ("feed-rate", ["9 m3/h", "18 m3/h"], 5.0, 10.0, 5e-4, "m3/h"),
    ],
)
def test_what_is_free(free, between, low, high, per, unit):
    question, _ = operating_point.read(changed(POINT, free=free, between=between))
    assert_allclose(question.between, (low, high))
    assert_allclose(question.per, per)
    assert question.unit == unit


def test_a_utility_s_temperature_is_free_where_there_is_one():
    document = changed(
        POINT, free="utility-temperature", thermal=EXCHANGE, between=["20 degC", "60 degC"]
    )
    assert operating_point.read(document)[0].free == "utility-temperature"


@pytest.mark.parametrize(
    ("fault", "places"),
    [
        (("cannot-be-free", "/free"), {"free": "utility-temperature"}),
        (("cannot-be-free", "/free"), {"free": "pressure", "between": ["1 bar", "2 bar"]}),
        (("wrong-dimension", "/between/1"), {"between": ["40 degC", "2 bar"]}),
        (("conflicting-fields", "/between/1"), {"between": ["40 degC", "40 degC"]}),
        (
            ("conflicting-fields", "/between/1"),
            {"free": "feed-rate", "between": ["1 t/h", "2 kmol/h"]},
        ),
        (
            ("conflicting-fields", "/thermal/temperature"),
            {"thermal": {"mode": "isothermal", "temperature": "50 degC"}},
        ),
        (("wrong-length", "/between"), {"between": ["40 degC"]}),
        (("not-a-choice", "/free"), {"free": "volume"}),
        (("size-not-stated", "/reactor"), {"reactor__volume": ...}),
    ],
)
def test_operating_points_that_are_refused(fault, places):
    assert faults(operating_point.read, changed(POINT, **places)) == {fault}


def test_a_batch_has_no_feed_rate():
    document = {
        **RATINGS["batch"],
        "target": {"conversion": 0.5},
        "free": "feed-rate",
        "between": ["1 mol/s", "2 mol/s"],
    }
    assert faults(operating_point.read, document) == {("cannot-be-free", "/free")}


@pytest.mark.parametrize("name", ["plug-flow", "batch", "packed-bed"])
def test_a_size_is_stated_where_it_is_not_asked_for(name):
    target = {"conversion": 0.5}
    size = "time" if name == "batch" else "volume"
    document = {**RATINGS[name], "target": target}
    assert faults(volume.read, document) == {("field-not-used", f"/reactor/{size}")}
    unsized = sized(name, target)
    del unsized["target"]
    assert faults(rating.read, unsized) == {("size-not-stated", "/reactor")}


def test_one_reactor_of_a_train_is_without_a_size():
    target = {"species": "SO3", "flow": "190 kmol/h"}
    question, _ = volume.read(sized("train", target))
    stages = question.asked.problem.reactor.stages
    assert [s.id for s in stages if hasattr(s, "reactor") and s.reactor.size is None] == ["bed-2"]
    whole = {**RATINGS["train"], "target": target}
    assert faults(volume.read, whole) == {("train-sizes", "/reactor/stages")}
    two = changed(sized("train", target), reactor__stages__0__volume=...)
    assert faults(volume.read, two) == {("train-sizes", "/reactor/stages")}
    unsized = changed(RATINGS["train"], reactor__stages__0__volume=...)
    assert faults(rating.read, unsized) == {("size-not-stated", "/reactor/stages/0")}
    none = changed(RATINGS["train"], reactor__stages=[STAGES[1]])
    assert faults(rating.read, none) == {("train-sizes", "/reactor/stages")}


STAGE = "reactor__stages__"


@pytest.mark.parametrize(
    ("name", "places", "fault"),
    [
        ("packed-bed", {"reactor__viscosity": ...}, ("field-needed", "/reactor/viscosity")),
        (
            "packed-bed",
            {"reactor__cross_section": ...},
            ("field-needed", "/reactor/cross_section"),
        ),
        (
            "packed-bed",
            {"reactor__particle_volume": "1 mm3"},
            ("conflicting-fields", "/reactor/particle_volume"),
        ),
        (
            "packed-bed",
            {"reactor__particle_diameter": ..., "reactor__particle_volume": "1 mm3"},
            ("field-needed", "/reactor/particle_surface"),
        ),
        (
            "packed-bed",
            {"reactor__tube_diameter": "2 m"},
            ("conflicting-fields", "/reactor/tube_diameter"),
        ),
        (
            "packed-bed",
            {"reactor__void_fraction": 1},
            ("impossible-value", "/reactor/void_fraction"),
        ),
        (
            "packed-bed",
            {"reactor__catalyst_mass": "9 t"},
            ("conflicting-fields", "/reactor/catalyst_mass"),
        ),
        ("clean-bed", {"reactor__pressure_drop": False}, ("field-not-used", "/reactor/clean_bed")),
        (
            "recycle-plug-flow",
            {"reactor__recycle_ratio": -1},
            ("impossible-value", "/reactor/recycle_ratio"),
        ),
        (
            "fed-batch",
            {"reactor__fed__stream__volumetric_flow": ...},
            ("field-needed", "/reactor/fed/stream/volumetric_flow"),
        ),
        (
            "fed-batch",
            {"reactor__fed__stream": {"phase": "gas", "flows": {"A": "1 kmol/h"}}},
            ("conflicting-fields", "/reactor/fed/stream/phase"),
        ),
        ("train", {STAGE + "1__duty": "1 MW"}, ("conflicting-fields", "/reactor/stages/1/duty")),
        ("train", {STAGE + "1__to": ...}, ("field-needed", "/reactor/stages/1/to")),
        ("train", {STAGE + "2__id": "bed-1"}, ("duplicate-id", "/reactor/stages/2/id")),
        (
            "train",
            {STAGE + "5__removed__SO3": 1.2},
            ("impossible-value", "/reactor/stages/5/removed/SO3"),
        ),
        (
            "train",
            {STAGE + "5__removed__X": 0.2},
            ("unknown-substance", "/reactor/stages/5/removed/X"),
        ),
        ("train", {STAGE + "0__kind": "batch"}, ("not-a-choice", "/reactor/stages/0/kind")),
        ("train", {STAGE + "0__id": ...}, ("missing-field", "/reactor/stages/0/id")),
        (
            "plug-flow",
            {"thermal": changed(EXCHANGE, utility_heat_capacity_flow=...)},
            ("field-needed", "/thermal/utility_heat_capacity_flow"),
        ),
        (
            "plug-flow",
            {"thermal": changed(EXCHANGE, arrangement="constant")},
            ("field-not-used", "/thermal/utility_heat_capacity_flow"),
        ),
        ("plug-flow", {"thermal__mode": "warm"}, ("not-a-choice", "/thermal/mode")),
        ("plug-flow", {"reactions__1__rate": ...}, ("field-needed", "/reactions/1/rate")),
        ("plug-flow", {"temperature_limit": "5 bar"}, ("wrong-dimension", "/temperature_limit")),
        ("plug-flow", {"profile_points": 1}, ("out-of-range", "/profile_points")),
        ("plug-flow", {"sensitivities": "yes"}, ("wrong-type", "/sensitivities")),
        ("plug-flow", {"gas_model": "peng-robinson"}, ("field-not-used", "/gas_model")),
        ("plug-flow", {"reactor__time": "1 h"}, ("unknown-field", "/reactor/time")),
    ],
)
def test_what_is_refused(name, places, fault):
    document = RATINGS[name]
    if "thermal__mode" in places:
        document = {**document, "thermal": {}}
    assert faults(rating.read, changed(document, **places)) == {fault}


def test_the_length_of_a_clean_bed_is_needed_where_that_of_this_one_is_asked_for():
    document = sized("clean-bed", {"conversion": 0.5})
    assert faults(volume.read, document) == {("field-needed", "/reactor/clean_bed/length")}
    stated = changed(document, reactor__clean_bed__length="0.8 m")
    bed = volume.read(stated)[0].asked.problem.reactor
    assert bed.clean_bed.length == 0.8


def test_a_gas_model_finds_z_of_feed_and_of_what_is_mixed_in():
    problem = rated("train", gas_model="peng-robinson")
    assert problem.gas is not None
    assert problem.feed.compressibility != 1
    assert problem.reactor.stages[3].stream.compressibility != 1


def test_faults_everywhere_are_told_together():
    document = changed(
        RATINGS["train"],
        key="XX",
        feed__temperature="-1 K",
        reactor__stages__0__volume="3 kg",
        reactor__stages__1__to="3 bar",
        temperature_limit="1 m",
    )
    assert faults(rating.read, document) == {
        ("unknown-key", "/key"),
        ("impossible-value", "/feed/temperature"),
        ("wrong-dimension", "/reactor/stages/0/volume"),
        ("wrong-dimension", "/reactor/stages/1/to"),
        ("wrong-dimension", "/temperature_limit"),
    }


def test_a_measured_drop_by_mass_needs_no_molar_mass_of_the_feed():
    clean = {**CLEAN_BED, "flow": "60 t/h", "molar_mass": "28.96 g/mol"}
    bed = rated("packed-bed", reactor={**BED, "clean_bed": clean}).reactor
    assert_allclose(bed.clean_bed.mass_flow, 60e3 / 3600)
    assert_allclose(bed.clean_bed.molar_mass, 0.02896)


def test_sizes_by_catalyst_need_no_volume():
    reactor = {"kind": "stirred-tank", "catalyst_mass": "250 kg"}
    assert rated("stirred-tank", reactor=reactor).reactor.size == Size("catalyst_mass", 250.0)
