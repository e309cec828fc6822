"""Questions about reactors of every kind for :mod:`tests.fuzz`: sane ones, careless and hostile."""

from __future__ import annotations

import random
from dataclasses import dataclass
from typing import Any

Json = Any

ROUTES = ("volume", "rating", "operating-point")
_KINDS = (
    "plug-flow",
    "stirred-tank",
    "tanks-in-series",
    "packed-bed",
    "batch",
    "recycle-plug-flow",
    "train",
)


@dataclass(frozen=True)
class _Chemistry:
    """Reactions by their equations, with the substances of each side, and what is fed."""

    reactions: tuple[tuple[str, tuple[str, ...], tuple[str, ...]], ...]
    fed: tuple[str, ...]
    inert: str
    phase: str
    species: dict[str, Json]


def _stated(names: str, **masses: int) -> dict[str, Json]:
    return {
        name: {"molar_mass": f"{masses.get(name, 60)} g/mol", "heat_capacity": "110 J/(mol K)"}
        for name in names
    }


_CHEMISTRIES = (
    _Chemistry((("A -> B", ("A",), ("B",)),), ("A",), "D", "liquid", _stated("ABD")),
    _Chemistry(
        (("A -> B", ("A",), ("B",)), ("B -> C", ("B",), ("C",))),
        ("A",),
        "D",
        "liquid",
        _stated("ABCD"),
    ),
    _Chemistry(
        (("A + B -> C", ("A", "B"), ("C",)), ("A + C -> D", ("A", "C"), ("D",))),
        ("A", "B"),
        "E",
        "liquid",
        _stated("ABCDE", A=30, B=30, C=60, D=90),
    ),
    _Chemistry(
        (("A <=> B", ("A",), ("B",)), ("B <=> A", ("B",), ("A",))),
        ("A",),
        "D",
        "gas",
        _stated("ABD"),
    ),
    _Chemistry(
        (("A <=> 2 B", ("A",), ("B",)),), ("A",), "D", "gas", _stated("ABD", A=80, B=40, D=28)
    ),
    _Chemistry(
        (("CO + H2O <=> CO2 + H2", ("CO", "H2O"), ("CO2", "H2")),),
        ("CO", "H2O"),
        "N2",
        "gas",
        {},
    ),
    _Chemistry(
        (("SO2 + 1/2 O2 <=> SO3", ("SO2", "O2"), ("SO3",)),), ("SO2", "O2"), "N2", "gas", {}
    ),
    _Chemistry(
        (
            ("C2H4 + 1/2 O2 -> C2H4O", ("C2H4", "O2"), ("C2H4O",)),
            ("C2H4 + 3 O2 -> 2 CO2 + 2 H2O", ("C2H4", "O2"), ("CO2", "H2O")),
        ),
        ("C2H4", "O2"),
        "CH4",
        "gas",
        {"C2H4O": {"formula": "C2H4O", "name": "ethylene oxide"}},
    ),
    _Chemistry(
        tuple((f"A{k} -> A{k + 1}", (f"A{k}",), (f"A{k + 1}",)) for k in range(19)),
        ("A0",),
        "Z",
        "liquid",
        {f"A{k}": {"molar_mass": "60 g/mol"} for k in range(20)} | {"Z": {"molar_mass": "9 g/mol"}},
    ),
)


class ReactorMaker:
    """Makes up questions about reactors; everything hangs on one random generator.

    ``wild`` is the share of members that are taken to extremes.
    """

    def __init__(self, rnd: random.Random, wild: float = 0.1) -> None:
        self.rnd, self.wild = rnd, wild

    def chance(self, p: float) -> bool:
        return self.rnd.random() < p

    def some(self, sane: list[Any], extreme: list[Any]) -> Any:
        """Return one of the sane values, or now and then one at an extreme."""
        return self.rnd.choice(extreme if self.chance(self.wild) else sane)

    def question(self, route: str | None = None, kind: str | None = None) -> tuple[str, Json]:
        """Return a route and a request."""
        route = route or self.rnd.choice(ROUTES)
        kind = kind or self.rnd.choice(_KINDS)
        chemistry = self.rnd.choice(_CHEMISTRIES)
        phase = chemistry.phase
        batch = kind == "batch"
        driving = self.rnd.choice(
            ["concentration", "concentration", "mole-fraction"]
            + (["partial-pressure"] if phase == "gas" else [])
        )
        per = "fluid-volume"
        if kind in ("packed-bed", "train", "plug-flow") and self.chance(0.6):
            per = "catalyst-mass"
        thermal = self._thermal()
        made: dict[str, Any] = {
            "reactions": [
                self._reaction(each, driving, per, hot=thermal["mode"] != "isothermal")
                for each in chemistry.reactions
            ],
            "key": chemistry.fed[0],
            "feed": self._stream(chemistry, batch=batch),
            "reactor": self._reactor(kind, chemistry, per, sized=route != "volume"),
            "thermal": thermal,
        }
        if chemistry.species:
            made["species"] = {name: dict(said) for name, said in chemistry.species.items()}
            for said in made["species"].values():
                if "heat_capacity" in said and self.chance(0.3 * self.wild):
                    said["heat_capacity"] = "1e-9 J/(mol K)"
        if phase == "gas" and not chemistry.species and self.chance(0.2):
            made["gas_model"] = self.rnd.choice(["peng-robinson", "soave-redlich-kwong", "ideal"])
        if route != "rating":
            made["target"] = self._target(chemistry, batch=batch)
        if route == "operating-point":
            self._free(made)
        if self.chance(0.3):
            made["profile_points"] = self.some([2, 6, 21], [0, 1, 501, 502])
        if self.chance(0.1):
            made["sensitivities"] = True
        if self.chance(0.1):
            made["temperature_limit"] = "90 degC"
        return route, made

    def _thermal(self) -> Json:
        mode = self.rnd.choice(["isothermal", "adiabatic", "exchange", "exchange"])
        if mode == "isothermal":
            return {"mode": mode} | (
                {"temperature": self.some(["360 K", "500 K"], ["1 K", "1e6 K"])}
                if self.chance(0.2)
                else {}
            )
        if mode == "adiabatic":
            return {"mode": mode}
        how = self.rnd.choice(["constant", "co-current", "counter-current"])
        made = {
            "mode": mode,
            "coefficient_area_per_volume": self.some(
                ["9 kW/(m3 K)", "1 kW/(m3 K)", "60 kW/(m3 K)"],
                ["1e-9 W/(m3 K)", "1e12 W/(m3 K)"],
            ),
            "utility_temperature": self.some(["20 degC", "60 degC", "225 degC"], ["1 K", "1e5 K"]),
            "arrangement": how,
        }
        if how != "constant":
            made["utility_heat_capacity_flow"] = self.some(
                ["14 kW/K", "3 kW/K", "100 W/K"], ["1e-9 W/K", "1e12 W/K"]
            )
        return made

    def _reaction(
        self,
        of: tuple[str, tuple[str, ...], tuple[str, ...]],
        driving: str,
        per: str,
        *,
        hot: bool,
    ) -> Json:
        equation, left, right = of
        orders = {n: self.some([1, 1, 1, 2, 0.5], [0, -1, 10, 3, -10, 1e-9]) for n in left}
        if self.chance(0.15):
            orders[right[0]] = self.some([1, -0.5, 0.5], [-10, 10])
        total = sum(orders.values())
        count = "mol kg^-1 s^-1" if per == "catalyst-mass" else "mol m^-3 s^-1"
        k = self.some([1e-3, 0.01, 0.1, 1.0], [1e-60, 1e12, 1e40, 1e-12])
        unit = count
        if total and driving == "concentration":
            unit += f" kmol^({-total:.12g}) m^({3 * total:.12g})"
        elif total and driving == "partial-pressure":
            unit += f" bar^({-total:.12g})"
        if driving == "concentration":
            k *= 1e3
        constant: Json = f"{k:.12g} {unit}"
        if hot or self.chance(0.5):
            constant = {
                "at": self.some(["350 K", "500 K"], ["1 K", "1e5 K"]),
                "constant": constant,
                "activation_energy": self.some(
                    ["60 kJ/mol", "90 kJ/mol", "20 kJ/mol"],
                    ["0 J/mol", "-40 kJ/mol", "1e6 kJ/mol", "-1e6 kJ/mol"],
                ),
            }
        rate: dict[str, Any] = {
            "of": left[0],
            "per": per,
            "driving": driving,
            "orders": orders,
            "constant": constant,
        }
        made: dict[str, Any] = {"equation": equation, "rate": rate}
        opaque = set(left) <= set("AB")
        if opaque and ("<=>" in equation or self.chance(0.2)):
            made["equation"] = equation.replace("->", "<=>")
            change = 1 if "2 B" in equation else len(right) - len(left)
            scale = f" bar^({change})" if change and driving != "concentration" else ""
            if change and driving == "concentration":
                scale = f" kmol^({change}) m^({-3 * change})"
            made["equilibrium_constant"] = {
                "at": "400 K",
                "constant": f"{self.some([0.5, 3, 40], [1e-9, 1e30])}{scale}",
                "enthalpy": self.some(["-40 kJ/mol", "30 kJ/mol"], ["-1e6 kJ/mol", "0 J/mol"]),
            }
            rate["reversible"] = {"affinity_exponent": self.some([1], [0.5, 10])}
        elif "<=>" in equation:
            made["equilibrium_constant"] = {"from": "thermochemistry"}
            rate["reversible"] = {}
        if (opaque or "C" in right or left[0].startswith("A")) and self.chance(
            0.95 if hot else 0.3
        ):
            made["enthalpy"] = {
                "heat": self.some(
                    ["-60 kJ/mol", "-20 kJ/mol", "45 kJ/mol"],
                    ["0 J/mol", "-1e9 kJ/mol", "1e9 kJ/mol"],
                ),
                "of": left[0],
                "at": self.some(["298.15 K"], ["1 K", "4000 K"]),
            }
        low = {"concentration": "1e-3 mol/m3", "partial-pressure": "1 Pa", "mole-fraction": "1e-6"}
        if any(order < 0 for order in orders.values()):
            rate["floor"] = {n: low[driving] for n, order in orders.items() if order < 0}
        if self.chance(0.1):
            term = {
                "concentration": "0.5 m3/kmol",
                "partial-pressure": "0.5 1/bar",
                "mole-fraction": "0.5",
            }[driving]
            rate["denominator"] = {
                "terms": [{"constant": term, "orders": {right[0]: 1}}],
                "power": self.some([1, 2], [10, 1e-3]),
            }
        if self.chance(0.05):
            rate["effectiveness"] = {
                "geometry": self.rnd.choice(["sphere", "slab", "cylinder"]),
                "size": self.some(["2 mm"], ["1 km", "1e-9 m"]),
                "diffusivity": "3e-6 m2/s",
                **({"particle_density": "1600 kg/m3"} if per == "catalyst-mass" else {}),
            } | ({} if per == "catalyst-mass" else {"void_fraction": 0.4})
        return made

    def _flows(self, chemistry: _Chemistry, unit: str, size: float) -> dict[str, str]:
        flows = {
            n: f"{size * self.some([1, 1.5, 3], [0, 1e-12, 1e9]):.9g} {unit}" for n in chemistry.fed
        }
        if self.chance(0.5):
            flows[chemistry.inert] = f"{size * self.some([1, 5], [1e9]):.9g} {unit}"
        if self.chance(0.3):
            flows[chemistry.reactions[0][2][0]] = f"{0.05 * size:.9g} {unit}"
        return flows

    def _stream(self, chemistry: _Chemistry, *, batch: bool, share: float = 1.0) -> Json:
        form, unit = ("amounts", "kmol") if batch else ("flows", "kmol/h")
        feed: dict[str, Any] = {
            "phase": chemistry.phase,
            form: self._flows(chemistry, unit, 10.0 * share),
            "temperature": self.some(["350 K", "420 K", "500 K"], ["1 K", "1e6 K", "5000 K"]),
        }
        if chemistry.phase == "gas":
            feed["pressure"] = self.some(["2 bar", "20 barg"], ["1e-9 Pa", "1e12 Pa", "400 bar"])
        else:
            size = share * self.some([1.0, 4.0], [1e-9, 1e9])
            feed["volume" if batch else "volumetric_flow"] = f"{size:.9g} m3" + (
                "" if batch else "/h"
            )
            if self.chance(self.wild):
                feed.pop("volume", None)
        return feed

    def _size(self, per: str) -> Json:
        if per == "catalyst-mass":
            return {"catalyst_mass": self.some(["2 t", "200 kg", "20 t"], ["1e-9 kg", "1e12 t"])}
        return {"volume": self.some(["0.2 m3", "2 m3", "20 m3"], ["1e-12 m3", "1e15 m3"])}

    def _reactor(self, kind: str, chemistry: _Chemistry, per: str, *, sized: bool) -> Json:
        made: dict[str, Any] = {"kind": kind}
        if kind == "train":
            return made | {"stages": self._stages(chemistry, per, sized=sized)}
        if kind == "batch":
            made["hold"] = self.rnd.choice(["volume", "pressure"])
            if sized:
                made["time"] = self.some(["1 h", "10 min", "20 h"], ["1e-9 s", "1e9 h"])
            if self.chance(0.4):
                made["fed"] = {"stream": self._stream(chemistry, batch=False, share=0.3)}
                if self.chance(0.6):
                    made["fed"]["duration"] = self.some(["1 h", "5 h"], ["1e-9 s", "1e9 h"])
            return made
        if sized:
            made |= self._size(per)
        if kind == "tanks-in-series":
            made["number"] = self.some([1, 2, 4], [10, 100])
        if kind == "recycle-plug-flow":
            made["recycle_ratio"] = self.some([0, 0.8, 3, 20], [1e-9, 1e4, 1e12])
        if kind == "packed-bed":
            if self.chance(0.8):
                made["bulk_density"] = "800 kg/m3"
            if self.chance(0.8):
                made |= {
                    "tubes": self.some([1, 100, 2000], [1_000_000]),
                    "tube_diameter": self.some(["30 mm", "2 m"], ["1 um", "1 km"]),
                    "particle_diameter": self.some(["4 mm"], ["1 um", "10 m"]),
                    "void_fraction": self.some([0.42], [0.01, 0.999]),
                    "viscosity": "0.02 mPa s",
                    "pressure_drop": self.chance(0.8),
                }
        return made

    def _stages(self, chemistry: _Chemistry, per: str, *, sized: bool) -> list[Json]:
        count = self.some([1, 2, 3], [6])
        without = None if sized else self.rnd.randrange(count)
        stages: list[Json] = []
        for k in range(count):
            kind = self.rnd.choice(["plug-flow", "stirred-tank", "packed-bed", "tanks-in-series"])
            if self.chance(0.1):
                kind = "recycle-plug-flow"
            reactor = self._reactor(kind, chemistry, per, sized=k != without)
            if self.chance(0.15):
                reactor["thermal"] = self._thermal()
            stages.append({"id": f"r{k}", **reactor})
            between = self.rnd.choice(["cool", "heat", "mix", "separate", "none", "none"])
            other: dict[str, Any] = {"id": f"s{k}", "kind": between}
            if between in ("cool", "heat"):
                other |= self.rnd.choice([{"to": "400 K"}, {"duty": "50 kW"}])
            elif between == "mix":
                other["stream"] = self._stream(chemistry, batch=False, share=0.2)
            elif between == "separate":
                other["removed"] = {
                    chemistry.reactions[0][2][0]: self.some(["90 %"], ["100 %", "0 %"])
                }
                if self.chance(self.wild):
                    other["removed"] |= dict.fromkeys(chemistry.fed, "100 %")
            if between != "none":
                stages.append(other)
        return stages

    def _target(self, chemistry: _Chemistry, *, batch: bool) -> Json:
        product = self.rnd.choice(chemistry.reactions)[2][0]
        form = self.rnd.choice(
            ["conversion"] * 4
            + ["approach", "flow", "mole_fraction", "concentration", "yield", "maximum"]
        )
        if form == "conversion":
            return {"conversion": self.some([0.3, 0.6, 0.9], [0, 1e-12, 1, 1 - 1e-12, -0.2])}
        if form == "approach":
            return {"approach": self.some(["20 K", "5 K"], ["0 K", "-5 K", "1e6 K"])}
        value = {
            "flow": self.some(["3 kmol/h", "6 kmol/h"], ["0 kmol/h", "1e12 kmol/h"]),
            "mole_fraction": self.some([0.05, 0.2], [0, 1]),
            "concentration": self.some(["0.5 kmol/m3", "0.02 kmol/m3"], ["0 kmol/m3"]),
            "yield": self.some([0.2, 0.5], [0, 1]),
            "maximum": True,
        }[form]
        if form == "flow" and batch:
            value = value.removesuffix("/h")
        return {"species": product, form: value}

    def _free(self, made: dict[str, Any]) -> None:
        free = ["feed-rate", "temperature"]
        if made["feed"]["phase"] == "gas":
            free.append("pressure")
        if made["thermal"]["mode"] == "exchange":
            free.append("utility-temperature")
        made["free"] = self.rnd.choice(free)
        made["between"] = {
            "feed-rate": self.some(
                [["1 kmol/h", "100 kmol/h"], ["5 kmol/h", "40 kmol/h"]],
                [["1e-9 kmol/h", "1e9 kmol/h"]],
            ),
            "temperature": self.some([["330 K", "520 K"]], [["1 K", "5000 K"], ["400 K", "401 K"]]),
            "pressure": self.some([["1 bar", "30 bar"]], [["1e-6 bar", "1e9 bar"]]),
            "utility-temperature": self.some([["300 K", "500 K"]], [["1 K", "1e5 K"]]),
        }[made["free"]]
        if made["free"] == "temperature":
            made["thermal"].pop("temperature", None)
