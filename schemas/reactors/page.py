"""What the page of a reactor question shows."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from itertools import pairwise
from typing import Any

from core.reactors.cautions import cautions
from core.reactors.problem import Batch
from core.reactors.reacted import Reacted, SteadyStates
from schemas.edge import Json
from schemas.page import Cells, Curve, Page, Plot, course, told
from schemas.reactors.answer import ReactorWriter
from schemas.table import Table
from schemas.units import spell

KINDS = {
    "plug-flow": "plug-flow reactor",
    "stirred-tank": "stirred tank",
    "tanks-in-series": "stirred tanks in series",
    "packed-bed": "packed bed",
    "batch": "batch",
    "recycle-plug-flow": "plug-flow reactor with recycle",
    "train": "train of reactors",
}
"""How a page calls the kinds of reactor."""
FREE = {
    "feed-rate": "feed rate",
    "temperature": "inlet temperature",
    "pressure": "inlet pressure",
    "utility-temperature": "temperature of the utility",
}
POSITIONS = ("time", "length", "volume", "catalyst_mass")
"""Columns of a profile that say where one is; the first that there is carries the plots."""
_STILL = 1e-6
"""Relative change along a reactor below which a quantity stays as it is."""

Numbers = list[tuple[str, Json | None]]


class ReactorPage:
    """The page of a reactor at work, made from its own result.

    Parameters
    ----------
    writer : ReactorWriter
    reacted : Reacted
    result : dict
        As it stands in the JSON answer.
    """

    def __init__(self, writer: ReactorWriter, reacted: Reacted, result: Json) -> None:
        self.writer, self.reacted, self.result = writer, reacted, result
        self.key = writer.names[writer.problem.key]
        self.what = KINDS[writer.problem.reactor.kind]

    def of_size(self) -> Page:
        """Return the page that says how big the reactor must be."""
        size = next(
            (name for name in ("time", "volume", "catalyst_mass") if name in self.result), "volume"
        )
        verdict = f"A conversion of {self.key} of {_percent(self.result['conversion'])}"
        verdict += f" takes {told(self.result.get(size))}"
        verdict += " of catalyst." if size == "catalyst_mass" else "."
        return self._page(f"Size of a {self.what}", verdict)

    def of_rating(self) -> Page:
        """Return the page that says what comes out of the reactor."""
        conversion, problem = _percent(self.result["conversion"]), self.writer.problem
        verdict = f"This {self.what} converts {conversion} of {self.key}"
        t = self.result["outlet"].get("temperature")
        verdict += "." if t is None else f" and ends at {told(t)}."
        states = len(self.result.get("steady_states", ()))
        if states > 1:
            verdict += f" That is one of {states} steady states."
        hot = next(
            (n for n in cautions(problem, self.reacted) if n.code == "temperature-limit-exceeded"),
            None,
        )
        if hot is not None:
            assert problem.temperature_limit is not None
            limit = self.writer.edge.number(problem.temperature_limit, "temperature")
            verdict += f" It gets hotter than its limit of {told(limit)}."
        return self._page(f"Rating of a {self.what}", verdict)

    def _page(self, title: str, verdict: str) -> Page:
        return Page(
            title=title,
            verdict=verdict,
            numbers=tuple(self.numbers()),
            plots=tuple(self.plots()),
            tables=tuple(self.tables()),
        )

    def numbers(self) -> Numbers:
        """Return the numbers that matter most."""
        result = self.result
        shown: Numbers = [(f"conversion of {self.key}", result["conversion"])]
        for name, words in (
            ("time", "time"),
            ("volume", "volume at the start" if self.writer.batch else "volume"),
            ("catalyst_mass", "catalyst"),
            ("length", "length of the bed"),
            ("largest_conversion", f"largest conversion of {self.key} on this way"),
            ("space_time", "space time"),
            ("catalyst_mass_per_key_flow", f"catalyst over {self.key} fed"),
            ("mean_residence_time", "mean residence time"),
            ("pressure_drop", "pressure drop"),
        ):
            if name in result:
                shown.append((words, result[name]))
        end = result["outlet"].get("volume") if self.writer.batch else None
        if end is not None and end["value"] != result["volume"]["value"]:
            shown.append(("volume at the end", end))
        for product, ratio in result.get("selectivities", {}).items():
            if ratio is not None:
                shown.append((f"selectivity to {product}", ratio))
        for name, number in result.get("space_velocities", {}).items():
            shown.append((f"hourly space velocity, {name}", number))
        shown += self._temperatures()
        shown += self._heats()
        for id_, approach in result.get("equilibrium", {}).get("approach", {}).items():
            shown.append((f"approach of {id_}", approach and approach["approach"]))
        most = result.get("accumulation")
        if most is not None:
            shown.append((f"most {most['species']} unreacted", most["amount"]))
            shown.append((f"of what is fed of {most['species']}", most["share"]))
            hot = most["temperature_if_cooling_stops"]
            shown.append(("temperature if cooling stops then", hot))
        return shown

    def _temperatures(self) -> Iterator[tuple[str, Json | None]]:
        result = self.result
        names = {"inlet": "inlet temperature", "outlet": "outlet temperature"}
        if self.writer.batch:
            names = {"inlet": "temperature of the charge", "outlet": "temperature at the end"}
        for side, words in names.items():
            if "temperature" in result[side]:
                yield words, result[side]["temperature"]
        if "hottest" in result:
            where = result["hottest"].get("stage")
            inside = "" if where is None else f", in {where}"
            yield f"highest temperature{inside}", result["hottest"]["temperature"]
        if "utility_outlet_temperature" in result:
            yield "utility leaves at", result["utility_outlet_temperature"]

    def _heats(self) -> Iterator[tuple[str, Json | None]]:
        heat = self.result["heat"]
        if heat is None:
            return
        yield "heat supplied (below zero: removed)", heat["duty"]
        if "adiabatic_rise" in heat:
            yield "adiabatic rise of this conversion", heat["adiabatic_rise"]
            yield "adiabatic rise of complete conversion", heat["adiabatic_rise_complete"]

    def tables(self) -> Iterator[tuple[str, Table]]:
        """Yield the tables that are shown in full."""
        yield "Composition", self.writer.composition(self.reacted)
        if "stages" in self.result:
            yield "Stages", _rows(self.result["stages"], STAGE_COLUMNS)
        for where, states in self._states():
            yield f"Steady states{where}", _rows(states, STATE_COLUMNS)
        if "sensitivities" in self.result:
            yield "What it hangs on", _sensitivities(self.result["sensitivities"])

    def _states(self) -> Iterator[tuple[str, list[Json]]]:
        if "steady_states" in self.result:
            yield "", self.result["steady_states"]
        for stage in self.result.get("stages", ()):
            if "steady_states" in stage:
                yield f" of {stage['id']}", stage["steady_states"]

    def plots(self) -> Iterator[Plot]:
        """Yield the plots: of the way through the reactor, and of its heat."""
        way = self.reacted.profile
        if way is not None:
            table = self.writer.profile(way)
            yield from self._along(table)
        stages = [stage for stage in self.result.get("stages", ()) if "profile" in stage]
        if stages:
            yield from self._through_stages(stages)
        states = self.reacted.steady_states
        if states is not None and states.curves is not None:
            yield self._heat_plot(states)

    def _along(self, table: Table) -> Iterator[Plot]:
        where = next(name for name in POSITIONS if name in table.columns)
        columns = table.columns
        yield _plot(
            f"Conversion of {self.key} along the way",
            table,
            where,
            {self.key: "conversion"},
            f"conversion of {self.key}",
        )
        reciprocal = self._reciprocal(table)
        if reciprocal is not None:
            yield reciprocal
        warm = {
            words: name
            for words, name in (
                ("the reactor", "temperature"),
                ("the utility", "utility_temperature"),
            )
            if name in columns
        }
        if any(_moves(columns[name], self._zero("temperature")) for name in warm.values()):
            yield _plot("Temperature along the way", table, where, warm, "temperature", most=2)
        if "pressure" in columns and _moves(columns["pressure"], self._zero("pressure")):
            yield _plot(
                "Pressure along the way", table, where, {"pressure": "pressure"}, "pressure"
            )
        yield from self._composition_plot(table, where)

    def _zero(self, dimension: str) -> float:
        """Return what stands for nothing at all in the unit of a dimension."""
        scale = self.writer.edge.scales[dimension]
        return -scale.offset / scale.factor

    def _composition_plot(self, table: Table, where: str) -> Iterator[Plot]:
        nu = self.writer.problem.reactions.nu
        # An inert that the feed is full of would leave no room for what reacts.
        names = [n for i, n in enumerate(self.writer.names) if nu[:, i].any()]
        shares = {n: f"mole fraction {n}" for n in names if f"mole fraction {n}" in table.columns}
        word = self.writer.words.flow
        each = shares or {n: f"{word} {n}" for n in names if f"{word} {n}" in table.columns}
        if each:
            what = "mole fraction" if shares else word
            yield _plot("Composition along the way", table, where, each, what, most=3)

    def _reciprocal(self, table: Table) -> Plot | None:
        """Return 1/rate against conversion, whose area is the size; where all is fed at once."""
        rates, reactor = table.columns.get("rate"), self.writer.problem.reactor
        fed = isinstance(reactor, Batch) and reactor.fed is not None
        if rates is None or fed or reactor.kind == "train":
            return None
        inverse = [None if not r else 1 / r for r in rates]
        unit = spell([(table.units["rate"], -1)])
        behind = Table(
            {"conversion": table.columns["conversion"], "1/rate": inverse},
            {"conversion": "1", "1/rate": unit},
        )
        return _plot(
            f"Reciprocal rate of {self.key} against conversion",
            behind,
            "conversion",
            {f"1/rate of {self.key}": "1/rate"},
            f"1/rate of {self.key}",
            x_label=f"conversion of {self.key}",
        )

    def _through_stages(self, stages: Sequence[Json]) -> Iterator[Plot]:
        """Yield temperature against conversion, stage by stage, as of beds with coolers between."""
        drawn: list[Curve] = []
        columns: dict[str, list[Any]] = {"stage": [], "conversion": [], "temperature": []}
        for stage in stages:
            inner = stage["profile"]["columns"]
            if "temperature" not in inner:
                return
            x, t = inner["conversion"], inner["temperature"]
            drawn.append(Curve(stage["id"], x, t))
            columns["stage"] += [stage["id"]] * len(x)
            columns["conversion"] += x
            columns["temperature"] += t
        unit = stages[0]["profile"]["units"]["temperature"]
        says = [
            course(
                f"the temperature in {curve.label}",
                *(curve.y, curve.x, "1", unit),
                at="at a conversion of",
            )
            for curve in drawn
        ]
        yield Plot(
            "Temperature against conversion, stage by stage",
            f"conversion of {self.key}",
            f"temperature [{unit}]",
            tuple(drawn),
            " ".join(says),
            Table(columns, {"conversion": "1", "temperature": unit}),
        )

    def _heat_plot(self, states: SteadyStates) -> Plot:
        assert states.curves is not None
        table = self.writer.heat_curves(states.curves)
        t = table.columns["temperature"]
        at = [
            state["temperature"]["value"]
            for state in self.result["steady_states"]
            if state["temperature"] is not None
        ]
        on = [_interpolated(x, t, table.columns["heat_removed"]) for x in at]
        unit = table.units["temperature"]
        listed = ", ".join(f"{x:.5g} {unit}" for x in at)
        return Plot(
            "Heat given off and heat removed",
            f"temperature of the tank [{unit}]",
            f"heat [{table.units['heat_generated']}]",
            (
                Curve("given off", t, table.columns["heat_generated"]),
                Curve("removed", t, table.columns["heat_removed"]),
                Curve("steady states", at, on, "points"),
            ),
            f"The heat given off and the heat removed are equal at {listed}.",
            table,
        )


STAGE_COLUMNS = (
    ("stage", "id"),
    ("kind", "kind"),
    ("conversion", "conversion"),
    ("volume", "volume"),
    ("catalyst", "catalyst_mass"),
    ("duty", "duty"),
    ("outlet temperature", "outlet/temperature"),
    ("outlet pressure", "outlet/pressure"),
)
POINT_COLUMNS = (
    ("conversion", "conversion"),
    ("outlet temperature", "outlet/temperature"),
    ("highest temperature", "hottest/temperature"),
    ("outlet pressure", "outlet/pressure"),
    ("heat supplied", "heat/duty"),
)
STATE_COLUMNS = (
    ("temperature", "temperature"),
    ("conversion", "conversion"),
    ("stable", "stable"),
    ("described here", "described"),
)


def _rows(documents: Sequence[Json], shown: Sequence[tuple[str, str]]) -> Table:
    """Return a row for each document, with what of it is shown; what none has is left out."""
    columns: dict[str, list[Any]] = {}
    units: dict[str, str] = {}
    for words, path in shown:
        found = [_at(document, path) for document in documents]
        if all(one is None for one in found):
            continue
        columns[words] = [one["value"] if isinstance(one, dict) else one for one in found]
        unit = next((one["unit"] for one in found if isinstance(one, dict)), "1")
        if unit != "1":
            units[words] = unit
    return Table(columns, units)


def _at(document: Json, path: str) -> Any:
    found: Any = document
    for name in path.split("/"):
        found = None if found is None else found.get(name)
    return found


def _sensitivities(documents: Sequence[Json]) -> Table:
    """Return a row for each thing that the answer hangs on."""
    effects = dict.fromkeys(name for one in documents for name in one["effects"])
    columns: dict[str, list[Any]] = {
        "changed": [one["pointer"] for one in documents],
        "by": [told(one["change"]) for one in documents],
    }
    for name in effects:
        columns[name] = [told(one["effects"].get(name)) for one in documents]
    return Table(columns, {})


def points_page(pages: Sequence[ReactorPage], result: Json) -> Page:
    """Return the page that says where the reactor must be run."""
    free, first = FREE[result["free"]], pages[0]
    values = " or ".join(told(one["value"]) for one in result["solutions"])
    many = "" if len(pages) == 1 else "s"
    verdict = f"The target is met at the {free}{many} {values}."
    if not result["complete"]:
        verdict += " There may be others."
    numbers: Numbers = []
    tables: list[tuple[str, Table]] = []
    if len(pages) == 1:
        numbers = [(free, result["solutions"][0]["value"]), *first.numbers()]
    else:
        columns = ((free, "value"), *POINT_COLUMNS)
        tables.append(("Where the target is met", _rows(result["solutions"], columns)))
    optimum = result.get("optimum")
    if optimum is not None:
        numbers.append((f"{free} of the largest conversion", optimum["value"]))
        numbers.append((f"largest conversion of {first.key} there", optimum["conversion"]))
    plots: list[Plot] = []
    if "curve" in result:
        plots.append(_points_plot(first.key, free, result))
    for page, one in zip(pages, result["solutions"], strict=True):
        if len(pages) == 1:
            plots += page.plots()
        at = "" if len(pages) == 1 else f" at {told(one['value'])}"
        tables += [(f"{title}{at}", table) for title, table in page.tables()]
    return Page(
        title=f"Operating point of a {first.what}",
        verdict=verdict,
        numbers=tuple(numbers),
        plots=tuple(plots),
        tables=tuple(tables),
        notes=tuple(_notes_of(result["solutions"])),
    )


def _notes_of(solutions: Sequence[Json]) -> Iterator[Json]:
    """Yield the notes on the solutions: once where all have it, else with whose it is."""
    seen: dict[str, list[tuple[Json, Json]]] = {}
    for one in solutions:
        for note in one["notes"]:
            seen.setdefault(note["detail"], []).append((one, note))
    for detail, of in seen.items():
        note = of[0][1]
        if len(of) < len(solutions):
            where = " and ".join(told(one["value"]) for one, _ in of)
            note = {**note, "detail": f"at {where}: {detail}"}
        yield note


def _points_plot(key: str, free: str, result: Json) -> Plot:
    table = Table(result["curve"]["columns"], result["curve"]["units"])
    x, y = table.columns["value"], table.columns["conversion"]
    unit = table.units["value"]
    at = [one["value"]["value"] for one in result["solutions"]]
    met = [one["conversion"]["value"] for one in result["solutions"]]
    says = course(f"the conversion of {key}", y, x, unit, where="between the ends")
    listed = ", ".join(f"{value:.5g} {unit}" for value in at)
    return Plot(
        f"Conversion of {key} against {free}",
        f"{free} [{unit}]",
        f"conversion of {key}",
        (Curve(key, x, y), Curve("target met", at, met, "points")),
        f"{says} The target is met at {listed}.",
        table,
    )


def _percent(number: Json) -> str:
    return f"{100 * number['value']:.4g} %"


def _moves(values: Cells, zero: float) -> bool:
    """Whether a column changes by more than rounding, counted from what is nothing at all."""
    there = [value - zero for value in values if value is not None]
    return bool(there) and max(there) - min(there) > _STILL * max(map(abs, there))


def _span(values: Cells) -> float:
    there = [value for value in values if value is not None]
    return max(there) - min(there) if there else 0.0


def _interpolated(x: float, xs: Cells, ys: Cells) -> float | None:
    there = [(a, b) for a, b in zip(xs, ys, strict=True) if a is not None and b is not None]
    for (a, b), (c, d) in pairwise(there):
        if a <= x <= c:
            return b if c == a else b + (d - b) * (x - a) / (c - a)
    return None


def _plot(
    title: str,
    table: Table,
    where: str,
    columns: Mapping[str, str],
    what: str,
    x_label: str | None = None,
    most: int = 1,
) -> Plot:
    """Return a plot of columns of a table over one of them; words tell those that change most."""
    x, x_unit = table.columns[where], table.units.get(where, "1")
    unit = table.units.get(next(iter(columns.values())), "1")
    label = x_label or where.replace("_", " ")
    ranked = sorted(columns, key=lambda name: -_span(table.columns[columns[name]]))
    told_of = [name for name in columns if name in ranked[:most]]
    says = [
        course(
            f"the {what} of {name}" if len(columns) > 1 else f"the {what}",
            *(table.columns[columns[name]], x, x_unit, unit, "on the way"),
        )
        for name in told_of
    ]
    shown = (where, *columns.values())
    return Plot(
        title,
        label if x_unit == "1" else f"{label} [{x_unit}]",
        what if unit == "1" else f"{what} [{unit}]",
        tuple(Curve(n, x, table.columns[c]) for n, c in columns.items()),
        " ".join(says),
        Table(
            {n: table.columns[n] for n in shown},
            {n: table.units[n] for n in shown if n in table.units},
        ),
    )
