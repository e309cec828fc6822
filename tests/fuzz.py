"""Hostile and careless requests by the thousand, each answer held to what was promised.

Seeded and bounded: ``run(cases, seed)`` returns a list of :class:`Finding`, empty
when every answer kept these promises:

* a request that the published schema allows is answered 200 or 422, any other 400;
  no request is answered 500, none takes longer than ``slow`` seconds;
* every answer obeys the published schema, closed; no number is null, NaN or infinite;
  a null stands only where the contract allows one, and an answer with one has a note;
* each error has exactly one locator; its pointer leads to a place of the request, or
  to the missing member of one; the status is the code's own; no text of an answer
  shows a template's braces, nan, inf, a path or a traceback;
* the same bytes get the same bytes; the order of members changes no number;
* streams add up (mole fractions to 1, flows in = flows out by the extents), standard
  uncertainties are not negative, intervals hold their value, shares lie within 0 and 1;
* where the readings were made from a known account without noise, the conversion is that
  of the account.

Three sources of requests: packaged examples and the cases of the tests, mutated;
documents made from the published schema; accounts made up here and put in every form
that a plant might send them in, then mutated.
"""

# ruff: noqa: S311
from __future__ import annotations

import contextlib
import copy
import json
import logging
import math
import random
import re
import signal
import time
import warnings
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
from jsonschema import Draft202012Validator, ValidationError, validators

from schemas.contract import operation, published_text
from schemas.examples import EXAMPLES
from service.app import create_app
from service.statuses import STATUSES
from tests.fuzz_reactors import ReactorMaker

TABLE, CONVERSION, VOLUME = "stoichiometric-table", "conversion", "volume"
EQUILIBRIUM, RATING, OPERATING_POINT = "equilibrium", "rating", "operating-point"
ROUTES = (TABLE, CONVERSION, VOLUME, EQUILIBRIUM, RATING, OPERATING_POINT)
Json = Any


@dataclass
class Finding:
    """One broken promise: what kind, on which route, by which body, and what came back."""

    kind: str
    route: str
    body: bytes
    status: int
    detail: str
    case: int = -1
    seconds: float = 0.0
    answer: str = ""


DOUBTFUL = (
    "wild",
    "untrue",
    "absurd",
    "enormous",
    "fraction-range",
    "negative-flow",
    "slow",
    "order result/limiting",  # of substances used up together either may be named
)
"""Beginnings of the kinds that a person must judge: no promise need be broken."""


# --------------------------------------------------------------------------- contract


def _pattern(validator: Any, pattern: str, instance: Any, _: Any) -> Iterator[Any]:
    # Python's "$" also matches before a newline at the end; the one of ECMA-262 does not.
    strict = re.sub(r"\$$", r"\\Z", pattern)
    if validator.is_type(instance, "string") and not re.search(strict, instance):
        yield ValidationError(f"{instance!r} does not match {pattern!r}")


_Validator = validators.extend(Draft202012Validator, {"pattern": _pattern})


@cache
def contract() -> Json:
    return json.loads(published_text())


def closed(node: Any, *, named: bool = False) -> Any:
    if isinstance(node, dict):
        done = {k: closed(v, named=k in ("properties", "schemas")) for k, v in node.items()}
        is_object = node.get("type") == "object" and "properties" in node
        if not named and is_object and "additionalProperties" not in node:
            done["additionalProperties"] = False
        return done
    return [closed(v) for v in node] if isinstance(node, list) else node


@cache
def request_schema(route: str) -> Json:
    post = contract()["paths"][operation(route).path]["post"]
    return post["requestBody"]["content"]["application/json"]["schema"]


@cache
def request_validator(route: str) -> Any:
    return _Validator({**request_schema(route), "components": contract()["components"]})


@cache
def answer_validator(route: str, status: int) -> Any:
    answers = contract()["paths"][operation(route).path]["post"]["responses"]
    content = answers[str(status)]["content"]
    media = "application/json" if status == 200 else "application/problem+json"
    return _Validator({**content[media]["schema"], "components": closed(contract()["components"])})


def resolve(schema: Json) -> Json:
    while "$ref" in schema:
        name = schema["$ref"].rsplit("/", 1)[1]
        schema = contract()["components"]["schemas"][name]
    return schema


# --------------------------------------------------------------------------- posting


class _TooLong(BaseException):
    pass


class _Keep(logging.Handler):
    def __init__(self) -> None:
        super().__init__()
        self.last: BaseException | None = None

    def emit(self, record: logging.LogRecord) -> None:
        if record.exc_info:
            self.last = record.exc_info[1]


class Caller:
    """Posts bodies to the application, and remembers what went wrong inside."""

    def __init__(self, limit: float = 20.0) -> None:
        self.app = create_app()
        self.client = self.app.test_client()
        self.kept = _Keep()
        self.app.logger.handlers = [self.kept]
        self.app.logger.propagate = False
        self.limit = limit
        self.warned: list[str] = []
        warnings.simplefilter("always", RuntimeWarning)
        warnings.showwarning = self._warned  # type: ignore[assignment]

    def _warned(self, message: Any, _: Any, filename: str, lineno: int, *__: Any) -> None:
        short = re.search(r"(?:core|schemas|service)/.*", filename)
        self.warned.append(
            f"{short[0] if short else filename.rpartition('/')[2]}:{lineno} {message}"
        )

    def post(self, route: str, body: bytes, **headers: str) -> tuple[int, bytes, str, float]:
        """Return status, body, media type and seconds."""
        self.kept.last = None
        self.warned.clear()

        def stop(*_: Any) -> None:
            raise _TooLong

        before = signal.signal(signal.SIGALRM, stop)
        signal.setitimer(signal.ITIMER_REAL, self.limit)
        start = time.perf_counter()
        try:
            answer = self.client.post(
                operation(route).path, data=body, content_type="application/json", headers=headers
            )
            return (
                answer.status_code,
                answer.get_data(),
                answer.mimetype,
                time.perf_counter() - start,
            )
        except _TooLong:
            # The interruption may have come where errors were handed to a callback.
            np.seterr(divide="warn", over="warn", under="ignore", invalid="warn")
            np.seterrcall(None)
            return 0, b"", "", time.perf_counter() - start
        finally:
            signal.setitimer(signal.ITIMER_REAL, 0)
            signal.signal(signal.SIGALRM, before)

    def failure(self) -> str:
        """Where the last 500 came from: exception and the innermost frame of the project."""
        error = self.kept.last
        if error is None:
            return "unknown"
        place, trace = "", error.__traceback__
        while trace is not None:
            name = trace.tb_frame.f_code.co_filename
            if re.search(r"/(core|schemas|service)/[^/]*", name) and "site-packages" not in name:
                short = re.search(r"(?:core|schemas|service)/.*", name)
                place = f"{short[0] if short else name}:{trace.tb_frame.f_code.co_name}"
            trace = trace.tb_next
        return f"{type(error).__name__} in {place}: {str(error)[:120]}"


# --------------------------------------------------------------------------- promises

_LEAK = re.compile(
    r"Traceback|site-packages|/home/|/usr/|/tmp/|\.py\b|<class |object at 0x|\bnp\.|numpy|array\(|"
    + re.escape(str(Path(__file__).resolve().parents[1]))
)
_NOT_A_NUMBER = re.compile(r"(?<![\w'\"-])-?(?:nan|inf|infinity)(?![\w'\"-])", re.I)


def leads_somewhere(document: Json, pointer: str) -> bool:
    """Whether a pointer leads to a place of the document, or to a missing member of one."""
    if pointer == "":
        return True
    if not pointer.startswith("/"):
        return False
    tokens = [t.replace("~1", "/").replace("~0", "~") for t in pointer[1:].split("/")]
    node = document
    for i, token in enumerate(tokens):
        last = i == len(tokens) - 1
        if isinstance(node, dict):
            if token not in node:
                return last
            node = node[token]
        elif isinstance(node, list):
            if not token.isdigit() or int(token) >= len(node):
                return False
            node = node[int(token)]
        else:
            return False
    return True


def texts(document: Json) -> Iterator[str]:
    if isinstance(document, dict):
        for k, v in document.items():
            if k in ("detail", "title"):
                yield str(v)
            else:
                yield from texts(v)
    elif isinstance(document, list):
        for v in document:
            yield from texts(v)


def caller_text(document: Json) -> set[str]:
    """Every string that the caller sent, names of members too."""
    found: set[str] = set()

    def walk(node: Json) -> None:
        if isinstance(node, dict):
            for k, v in node.items():
                found.add(k)
                walk(v)
        elif isinstance(node, list):
            for v in node:
                walk(v)
        elif isinstance(node, str):
            found.add(node)

    walk(document)
    return found


def judge(
    caller: Caller,
    route: str,
    body: bytes,
    *,
    slow: float = 2.0,
    tell: dict[str, Any] | None = None,
) -> list[tuple[str, str]]:
    """Return the promises that the answer to one body breaks, as (kind, detail)."""
    status, raw, _media, seconds = caller.post(route, body)
    if tell is not None:
        tell.update(status=status, seconds=seconds, answer=raw, failure="")
    broken: list[tuple[str, str]] = []
    if status == 0:
        return [("hang", f"no answer in {seconds:.1f} s")]
    if seconds > slow:
        broken.append(("slow", f"{seconds:.2f} s"))
    broken += [(f"warning {text}", f"status {status}") for text in dict.fromkeys(caller.warned)]
    if status == 500:
        why = caller.failure()
        if tell is not None:
            tell["failure"] = why
        return [
            *broken,
            (f"500 {why.split(':')[0]}:{why.split(':')[1].strip() if ':' in why else ''}", why),
        ]
    if status not in (200, 400, 422):
        return [*broken, (f"status {status}", raw[:300].decode(errors="replace"))]
    if not raw.endswith(b"\n"):
        broken.append(("no-newline", ""))
    try:
        answer = json.loads(raw, parse_constant=lambda s: broken.append(("constant", s)))
    except ValueError as error:
        return [*broken, ("not-json", str(error))]
    faults = list(answer_validator(route, status).iter_errors(answer))
    for fault in faults[:3]:
        place = "/".join("*" if isinstance(p, int) else str(p) for p in fault.absolute_path)
        best = min(fault.context or [fault], key=lambda f: -len(f.absolute_path))
        deep = "/".join(map(str, best.absolute_path))
        broken.append((f"contract {_generic(place)}", f"{deep}: {best.message[:200]}"))
    try:
        document = json.loads(body.decode())
        json.dumps(document, ensure_ascii=False).encode()  # a lone surrogate is no text
        unique = _no_duplicates(body)
    except (ValueError, RecursionError):
        document, unique = None, True
        if status != 400:
            broken.append(("accepted-non-json", ""))
    if document is not None and unique:
        valid = request_validator(route).is_valid(document)
        if valid and status == 400:
            error = answer["errors"][0]
            broken.append((f"400-for-valid {error['code']}", f"{error}"))
        if not valid and status != 400:
            why = next(request_validator(route).iter_errors(document))
            why = min(why.context or [why], key=lambda f: -len(f.absolute_path))
            broken.append(
                (
                    f"{status}-for-invalid {why.validator}",
                    f"{list(why.absolute_path)}: {why.message[:200]}",
                )
            )
    if not unique and status != 400:
        broken.append(("duplicate-accepted", ""))
    sent = caller_text(document) if document is not None else set()
    for text in texts(answer):
        if _LEAK.search(text) and not any(_LEAK.search(s) and s[:20] in text for s in sent):
            broken.append(("leak", text[:300]))
        if re.search(r"\{\w*[}:!.\[]|\{\{", text) and not any("{" in s for s in sent):
            broken.append(("template", text[:300]))
        odd = _NOT_A_NUMBER.search(text)
        if odd and not any(odd[0] in s for s in sent) and "number is infinity" not in text:
            broken.append(("nan-in-text", text[:300]))
        if len(text) > 20000:
            broken.append(("long-text", f"{len(text)} characters: {text[:100]}"))
    if status != 200:
        broken += refusal_faults(answer, document, status)
    else:
        broken += answer_faults(route, answer, document)
    return broken


def _generic(place: str) -> str:
    keep = {
        "result",
        "inlet",
        "outlet",
        "species",
        "states",
        "reconciliation",
        "readings",
        "flow",
        "amount",
        "u",
        "value",
        "conversion",
        "closure",
        "yields",
        "selectivities",
        "extents",
        "mole_fraction",
        "concentration",
        "total",
        "volumetric_flow",
        "volume",
        "interval",
        "*",
        "profile",
        "columns",
        "factor",
        "notes",
        "theta",
        "changes",
        "measured",
        "reconciled",
        "redundancy",
        "adjustment_over_u",
        "measurement_test",
        "smallest_detectable_error",
        "chi_square",
        "limiting",
        "space_time",
        "outlet_rate",
        "delta",
        "epsilon",
        "pressure",
        "temperature",
        "time",
        "phase_total",
        "compressibility",
        "errors",
        "expressions",
        "constant_flow_error",
        "largest_conversion",
        "smallest_conversion",
        "key_mole_fraction",
        "without_suspect",
        "overall",
        "fresh_feed",
        "recycle",
        "purge",
        "product",
        "recycle_ratio",
    }
    return "/".join(p if p in keep else "?" for p in place.split("/"))


def _no_duplicates(body: bytes) -> bool:
    fine = True

    def pairs(items: list[tuple[str, Any]]) -> dict[str, Any]:
        nonlocal fine
        made = dict(items)
        fine = fine and len(made) == len(items)
        return made

    json.loads(body.decode(), object_pairs_hook=pairs)
    return fine


def refusal_faults(answer: Json, document: Json, status: int) -> list[tuple[str, str]]:
    broken = []
    errors = answer.get("errors", [])
    if not errors:
        broken.append(("no-errors", answer.get("detail", "")))
    if answer.get("errors_total", len(errors)) != len(errors) and len(errors) != 100:
        broken.append(("errors-total", ""))
    if answer.get("status") != status:
        broken.append(("status-member", ""))
    code = answer.get("type", "").removeprefix("/problems/")
    if STATUSES.get(code) != status:
        broken.append(
            (
                f"status-of-code {code}",
                f"{code} is published with {STATUSES.get(code)}, answered {status}",
            )
        )
    for error in errors:
        where = set(error) & {"pointer", "parameter", "header"}
        if len(where) != 1:
            broken.append((f"locators {error.get('code')}", str(error)))
        if STATUSES.get(error.get("code")) != status:
            broken.append((f"status-of-code {error.get('code')}", f"{error}"[:300]))
        pointer = error.get("pointer")
        if pointer is not None and document is not None and not leads_somewhere(document, pointer):
            broken.append((f"pointer {error['code']}", f"{pointer}: {error['detail'][:200]}"))
        if len(error.get("detail", "")) < 10:
            broken.append((f"short-detail {error.get('code')}", str(error)))
    return broken


_NULLS = {"limiting", "consistent", "limit", "p_value"}


def answer_faults(route: str, answer: Json, document: Json) -> list[tuple[str, str]]:
    broken: list[tuple[str, str]] = []
    result = answer["result"]
    for note in (*answer["notes"], *answer["assumed"]):
        pointer = note.get("pointer")
        if pointer is not None and document is not None and not leads_somewhere(document, pointer):
            broken.append((f"note-pointer {note['code']}", f"{pointer}: {note['detail'][:200]}"))
    nulls: list[str] = []
    # An interval of draws may lie beside an estimate that is off their mean.
    by_draws = "uncertainty" in result

    def walk(node: Json, path: str) -> None:
        if isinstance(node, dict):
            if "value" in node and "unit" in node:
                value, u = node["value"], node.get("u")
                if u is not None and u < 0:
                    broken.append(("u-negative", f"{path} {node}"))
                interval = node.get("interval")
                if interval and value is not None and None not in interval and not by_draws:
                    slack = 1e-9 * (abs(value) + abs(interval[0]) + abs(interval[1]))
                    if not interval[0] - slack <= value <= interval[1] + slack:
                        broken.append(("interval", f"{path} {node}"))
                return
            for k, v in node.items():
                walk(v, f"{path}/{k}")
        elif isinstance(node, list):
            for i, v in enumerate(node):
                walk(v, f"{path}/{i}")
        elif node is None:
            nulls.append(path)

    walk(result, "")
    codes = {note["code"] for note in (*answer["notes"], *answer["assumed"])}
    # An operating point has notes of its own.
    codes |= {note["code"] for each in result.get("solutions", ()) for note in each["notes"]}
    for path in nulls:
        name = path.rsplit("/", 1)[1]
        if name in _NULLS or "/reconciliation/readings/" in path:
            continue
        # The pressure of a liquid need not be stated; rows without an answer are counted.
        if route == EQUILIBRIUM and (path == "/pressure" or path.startswith("/sweep/")):
            continue
        if path.startswith("/equilibrium_constants/") and name == "value":
            continue
        kind = _null_kind(path)
        if not codes & _NULL_NOTES.get(kind, frozenset(codes)):
            broken.append((f"null-without-note {kind}", f"{path}; notes {sorted(codes)}"))
    for place in ("inlet", "outlet"):
        if place in result:
            broken += stream_faults(result[place], place)
    for state in result.get("states", ()):
        broken += stream_faults(state["outlet"], "states/outlet")
    overall = result.get("overall", {})
    for place in ("fresh_feed", "recycle", "purge", "product"):
        if place in overall:
            broken += stream_faults(overall[place], f"overall/{place}")
    if route == CONVERSION:
        if ("recycle" in (document or {})) != bool(overall):
            broken.append(("overall", str(sorted(overall))))
        x = result["conversion"]
        if x is not None and None in (x["value"], x["u"]):
            return broken  # told by the contract already
        if (
            x is not None
            and not -1e3 < x["value"] < 1.001 + 3 * x["u"]
            and not codes & {"negative-flow", "readings-inconsistent"}
        ):
            broken.append(("absurd-conversion", f"{x}"))
        if x is not None and abs(x["value"]) > 1e6 and "negative-flow" not in codes:
            broken.append(("enormous-conversion", f"{x}"))
        for kind in ("yields", "selectivities"):
            for name, y in result[kind].items():
                if y is not None and abs(y["value"] or 0) > 1e6 and "negative-flow" not in codes:
                    broken.append((f"enormous-{kind}", f"{name} {y}"))
        if (
            x is not None
            and abs(x["value"]) < 1e-13
            and x["u"] == 0
            and any(result["selectivities"].values())
        ):
            broken.append(("selectivity-of-nothing", str(result["selectivities"])[:300]))
        for _k, reading in enumerate(result["reconciliation"]["readings"]):
            r = reading.get("redundancy")
            if r is not None and not -1e-6 <= r["value"] <= 1 + 1e-6:
                broken.append(("redundancy", f"{reading}"[:300]))
            if document is not None and not leads_somewhere(document, reading["reading"]):
                broken.append(("reading-pointer", reading["reading"]))
        p = result["reconciliation"].get("p_value")
        if p is not None and not 0 <= p["value"] <= 1:
            broken.append(("p-value", str(p)))
        chi = result["reconciliation"]["chi_square"]
        if chi is not None and chi["value"] < 0:
            broken.append(("chi-square", str(chi)))
        suspects = result["reconciliation"]["suspects"]
        told = codes & {"alternatives-not-all-given", "nothing-left-without-suspects"}
        if suspects and "without_suspect" not in result and not told:
            broken.append(("suspect-without-answer", str(suspects)))
    if "negative-flow" in codes:  # told; then a fraction is below zero or above one too
        broken = [b for b in broken if not b[0].startswith(("fraction-range", "negative-flow"))]
    if route == VOLUME:
        for name in ("volume", "time", "space_time", "mean_residence_time"):
            if result.get(name) is not None and (result[name]["value"] or 0) < 0:
                broken.append((f"negative {name}", str(result[name])))
        v = result.get("volume")
        if v is not None and v["value"] == 0 and result["conversion"]["value"] != 0:
            broken.append(("zero-volume", str(result["conversion"])))
        heat = result.get("heat") or {}
        # A train, between whose stages heat passes, has none.
        rises = [heat.get(name, 0) for name in ("adiabatic_rise", "adiabatic_rise_complete")]
        if (not heat or None in rises) and "heat-not-known" not in codes:
            broken.append(("heat-without-note", str(heat)))
        if None not in rises and "adiabatic_rise" in heat:
            within, whole = (abs(rise["value"]) for rise in rises)
            if within > whole * (1 + 1e-6) + 1e-6 and rises[0]["value"] * rises[1]["value"] > 0:
                broken.append(("rise-beyond-complete", str(heat)))
    return broken


_NULL_NOTES: dict[str, frozenset[str]] = {
    "heat": frozenset({"heat-not-known"}),
    "approach": frozenset({"approach-not-known"}),
    "concentration": frozenset({"concentrations-not-known", "per-mole-of-key", "nothing-in-phase"}),
}


def _null_kind(path: str) -> str:
    for name in (
        "closure",
        "yields",
        "selectivities",
        "extents",
        "key_consumed_by",
        "key_produced_by",
        "space_time_yields",
        "approach",
    ):
        if f"/{name}/" in path:
            return name
    return path.rsplit("/", 1)[1]


def stream_faults(stream: Json, place: str) -> list[tuple[str, str]]:
    broken = []
    if stream["total"] is None:
        return broken  # what the readings leave open, with a note
    flows, fractions = [], []
    for name, said in stream["species"].items():
        flow = said.get("flow") or said.get("amount")
        flows.append(flow["value"])
        fraction = said.get("mole_fraction")
        if fraction is not None:
            fractions.append(fraction["value"])
            whole = stream.get("phase_total", stream["total"])["value"]
            spread = 3 * (flow.get("u") or 0.0) / abs(whole or 1.0)
            if not -1e-6 - spread <= fraction["value"] <= 1 + 1e-6 + spread:
                broken.append((f"fraction-range {place}", f"{name}: {fraction['value']:.6g}"))
    if None in flows or None in fractions or stream["total"]["value"] is None:
        return broken
    if fractions and abs(math.fsum(fractions) - 1) > 1e-6:
        broken.append((f"fractions {place}", f"sum {math.fsum(fractions):.9g}"))
    total = stream["total"]["value"]
    size = math.fsum(map(abs, flows))
    if abs(math.fsum(flows) - total) > 1e-9 * (size + abs(total)):
        broken.append((f"total {place}", f"{math.fsum(flows)!r} {total!r}"))
    us = [
        (said.get("flow") or said["amount"]).get("u") or 0.0 for said in stream["species"].values()
    ]
    if any(f + 2.01 * u < -1e-9 * size for f, u in zip(flows, us, strict=True)):
        broken.append((f"negative-flow {place}", f"{min(flows):.6g} of {size:.6g}"))
    return broken


# --------------------------------------------------------------------------- names and units

NAMES = [
    "_schema",
    "__proto__",
    "constructor",
    "a/b",
    "a~b",
    "~1",
    "~0",
    "/",
    "ä",
    "水",
    "\U0001f9ea",
    "x" * 80,
    "'",
    '"',
    "\\",
    "{",
    "}",
    "{}",
    "{0}",
    "{found}",
    "{found.x}",
    "{found[0]}",
    "{key}",
    "{limit:>9}",
    "{name!r}",
    "{{x}}",
    "%s",
    "%(x)s",
    "None",
    "null",
    "true",
    "0",
    "-",
    "A B",
    "A-B",
    "=SUM(A1)",
    "<script>",
    "é\u0301",
    "\u202eabc",
    "values",
    "value",
    "unit",
    "conversion",
    "id",
    "*",
    "H2O(l)",
    "CO(g)",
    "2A",
    "e-",
    "A+",
    "A^2-",
    "\u200b",
    "NaN",
    "inf",
    "species",
    "feed",
    "A\u00a0",
    "ﬁ",
    "K",
    "Σ",
    "..",
    "1/2",
    "x y z",
    "water (hot)",
]
CONTROL = ["\x00", "a\nb", "\t", "\x7f", "\x1f", "CO\n", "", " ", " CO", "x" * 81]

FLOW_UNITS = [
    "kmol/h",
    "mol/s",
    "lbmol/h",
    "Nm3/h",
    "Sm3/h",
    "scfm",
    "MMscfd",
    "kmol/d",
    "kg/h",
    "t/d",
    "lb/h",
    "mol/week",
]
UNITS = [
    *FLOW_UNITS,
    "kmol",
    "mol",
    "kg",
    "t",
    "bar",
    "barg",
    "psig",
    "mmH2O",
    "Pa",
    "MPa(g)",
    "atm",
    "K",
    "degC",
    "degF",
    "degR",
    "%",
    "mol%",
    "wt%",
    "vol%",
    "ppmv",
    "ppm",
    "mg/kg",
    "mg/Nm3",
    "g/l",
    "kmol/m3",
    "mol/l",
    "m3/h",
    "l/min",
    "m3",
    "gal",
    "1/min",
    "1/s",
    "kJ/mol",
    "J/kmol",
    "g/mol",
    "kg/kmol",
    "1",
    "",
    "-",
    "bar^-0.5",
    "m3/(kmol h)",
    "m3/kmol/h",
    "kmol/(m3 h)",
    "K^(1/3)",
    "mol/s (kt/ng)^5",
    "(kt/ng)^5 mol/s",
    "(ng/kt)^5 mol/s",
    "(kt/ng)^4 bar",
    "(ng/kt)^4 bar",
    "(ng/kt)^2 K",
    "(kt/ng)^2 K",
    "(kt/ng)^5",
    "(ng/kt)^5",
    "mbarg",
    "kgf/cm2",
    "μmol/s",
    "Nml/min",
    "(ng/kt)^5 m3/h",
    "(ng/kt)^4 kmol/m3",
    "(kt/ng)^5 kmol/m3",
    "(kt/ng)^2 g/mol",
    "(ng/kt)^2 g/mol",
]
NUMBERS = [
    0,
    -0.0,
    1,
    -1,
    2,
    0.5,
    1e-300,
    1e-100,
    1e-30,
    1e-15,
    1e-9,
    1e-6,
    1e-3,
    1e3,
    1e6,
    1e9,
    1e12,
    1e15,
    -1e15,
    1.0000001e15,
    1e16,
    1e300,
    0.99999999,
    1.00000001,
    0.3333333333333333,
    100,
    50,
    5e-324,
    -1e-300,
    2**53,
    2**53 + 1,
    2**63,
    2**64,
    10**20,
    10**40,
]


# --------------------------------------------------------------------------- made-up accounts


@dataclass
class System:
    """Reactions that could run together, and the substances that may stand beside them."""

    reactions: list[tuple[str, dict[str, float]]]
    key: str
    inerts: tuple[str, ...] = ("N2", "Ar")
    species: Json = field(default_factory=dict)
    phase: str = "gas"
    masses: dict[str, float] = field(default_factory=dict)


_OPAQUE = {name: {"molar_mass": "60 g/mol"} for name in "ABCD"}
SYSTEMS = [
    System(
        [("CO + H2O <=> CO2 + H2", {"CO": -1, "H2O": -1, "CO2": 1, "H2": 1})],
        "CO",
        ("N2", "CH4"),
        masses={
            "CO": 28.01,
            "H2O": 18.015,
            "CO2": 44.009,
            "H2": 2.016,
            "N2": 28.014,
            "CH4": 16.043,
        },
    ),
    System(
        [("SO2 + 1/2 O2 <=> SO3", {"SO2": -1, "O2": -0.5, "SO3": 1})],
        "SO2",
        masses={"SO2": 64.06, "O2": 31.998, "SO3": 80.06, "N2": 28.014, "Ar": 39.95},
    ),
    System(
        [
            ("CH4 + H2O <=> CO + 3 H2", {"CH4": -1, "H2O": -1, "CO": 1, "H2": 3}),
            ("CO + H2O <=> CO2 + H2", {"CO": -1, "H2O": -1, "CO2": 1, "H2": 1}),
        ],
        "CH4",
        masses={
            "CH4": 16.043,
            "CO": 28.01,
            "H2O": 18.015,
            "CO2": 44.009,
            "H2": 2.016,
            "N2": 28.014,
            "Ar": 39.95,
        },
    ),
    System(
        [
            ("C2H4 + 1/2 O2 -> C2H4O", {"C2H4": -1, "O2": -0.5, "C2H4O": 1}),
            ("C2H4 + 3 O2 -> 2 CO2 + 2 H2O", {"C2H4": -1, "O2": -3, "CO2": 2, "H2O": 2}),
        ],
        "C2H4",
        ("CH4", "Ar"),
        masses={
            "C2H4": 28.054,
            "O2": 31.998,
            "C2H4O": 44.053,
            "CO2": 44.009,
            "H2O": 18.015,
            "CH4": 16.043,
            "Ar": 39.95,
        },
    ),
    System(
        [("A -> B", {"A": -1, "B": 1})], "A", ("D",), _OPAQUE, "liquid", dict.fromkeys("ABCD", 60.0)
    ),
    System(
        [("A -> B", {"A": -1, "B": 1}), ("B <=> C", {"B": -1, "C": 1})],
        "A",
        ("D",),
        _OPAQUE,
        "liquid",
        dict.fromkeys("ABCD", 60.0),
    ),
    System(
        [("A <=> 2 B", {"A": -1, "B": 2})],
        "A",
        ("D",),
        {
            "A": {"molar_mass": "80 g/mol"},
            "B": {"molar_mass": "40 g/mol"},
            "D": {"molar_mass": "3 g/mol"},
        },
        "gas",
        {"A": 80.0, "B": 40.0, "D": 3.0},
    ),
    System(
        [("N2 + 3 H2 <=> 2 NH3", {"N2": -1, "H2": -3, "NH3": 2})],
        "N2",
        ("Ar", "CH4"),
        masses={"N2": 28.014, "H2": 2.016, "NH3": 17.031, "Ar": 39.95, "CH4": 16.043},
    ),
    System(
        [("Fe^2+ + Ag+ -> Fe^3+ + Ag", {"Fe^2+": -1, "Ag+": -1, "Fe^3+": 1, "Ag": 1})],
        "Ag+",
        ("H2O",),
        {"Ag": {"formula": "Ag", "phase": "solid"}},
        "liquid",
        {"Fe^2+": 55.844, "Fe^3+": 55.843, "Ag+": 107.8677, "Ag": 107.8682, "H2O": 18.015},
    ),
    System(
        [("2 H2O2 -> 2 H2O + O2", {"H2O2": -2, "H2O": 2, "O2": 1})],
        "H2O2",
        ("N2",),
        {},
        "liquid",
        {"H2O2": 34.014, "H2O": 18.015, "O2": 31.998, "N2": 28.014},
    ),
    System(
        [("1000000/3 A -> 1000000/3 B", {"A": -1e6 / 3, "B": 1e6 / 3})],
        "A",
        ("D",),
        _OPAQUE,
        "liquid",
        dict.fromkeys("ABCD", 60.0),
    ),
    System(
        [
            ("CO + H2O <=> CO2 + H2", {"CO": -1, "H2O": -1, "CO2": 1, "H2": 1}),
            ("CO2 + H2 <=> CO + H2O", {"CO": 1, "H2O": 1, "CO2": -1, "H2": -1}),
        ],
        "CO",
        ("N2",),
        masses={"CO": 28.01, "H2O": 18.015, "CO2": 44.009, "H2": 2.016, "N2": 28.014},
    ),
]


class Maker:
    """Makes up requests; everything hangs on one random generator."""

    def __init__(self, rnd: random.Random, *, wild: bool = True) -> None:
        self.rnd, self.wild = rnd, wild

    def chance(self, p: float) -> bool:
        return self.rnd.random() < p

    def spread(self, low: float, high: float) -> float:
        return 10 ** self.rnd.uniform(math.log10(low), math.log10(high))

    def flow(self, wild: bool) -> float:
        if wild:
            return self.rnd.choice(
                [0.0, self.spread(1e-12, 1e12), self.spread(0.1, 10), 1e-95, 1e14]
            )
        return 0.0 if self.chance(0.15) else self.spread(0.1, 500)

    def quantity(self, value: float, unit: str, u: str | None = None, rel: float = 0.01) -> Json:
        value = value if value == 0 or abs(value) > 1e-98 or self.chance(0.05) else 0.0
        style = u or self.rnd.choice(
            ["plain", "text", "rel", "abs", "zero", "tiny", "huge", "shared", "string"]
        )
        text = f"{value!r} {unit}".strip()
        if style == "text" or (style == "plain" and unit):
            return text if len(text) <= 80 else {"value": value, "unit": unit}
        made: dict[str, Any] = {"value": value}
        if unit:
            made["unit"] = unit
        if style == "rel":
            made["u_rel"] = rel
        elif style == "abs":
            made["u"] = abs(value) * rel
        elif style == "zero":
            made["u"] = 0
        elif style == "tiny":
            made["u"] = abs(value) * (self.rnd.choice([1e-8, 1e-12, 1e-5]) if self.wild else 1e-4)
        elif style == "huge":
            made["u"] = abs(value) * self.rnd.choice([1.0, 5.0, 100.0])
        elif style == "shared":
            made["u_shared"] = abs(value) * rel
            if self.chance(0.7):
                made["instrument"] = self.rnd.choice(["X1", "X1", "X2"])
            if self.chance(0.5):
                made["u"] = abs(value) * rel * self.rnd.choice([0.1, 1.0, 3.0])
        elif style == "string":
            made["u"] = f"{abs(value) * rel:.9g} {unit}".strip()
        return made

    def account(self) -> tuple[System, dict[str, float], dict[str, float], list[float]]:
        """Return a system, flows in and out (kmol/h), and the extents."""
        rnd = self.rnd
        system = rnd.choice(SYSTEMS)
        wild = self.wild and self.chance(0.4)
        names = list(dict.fromkeys(n for _, nu in system.reactions for n in nu))
        fed = {n: self.flow(wild) for n in names}
        fed[system.key] = fed[system.key] or self.spread(1, 100)
        for n in system.inerts:
            if self.chance(0.6):
                fed[n] = self.flow(wild)
        left, extents = dict(fed), []
        for _, nu in system.reactions:
            most = min(left[n] / -c for n, c in nu.items() if c < 0)
            share = rnd.choice([0.0, 1.0, rnd.random(), rnd.random(), rnd.random(), 1e-6, 0.999999])
            xi = most * share
            extents.append(xi)
            for n, c in nu.items():
                left[n] = max(0.0, left[n] + c * xi)
        if self.chance(0.3):
            fed = {n: f for n, f in fed.items() if f or n == system.key}
        return system, fed, left, extents

    def reactions(self, system: System) -> list[Json]:
        return [
            text if self.chance(0.5) else {"id": f"q{i}", "equation": text}
            for i, (text, _) in enumerate(system.reactions)
        ]

    def base(self, system: System) -> dict[str, Any]:
        made: dict[str, Any] = {"reactions": self.reactions(system), "key": system.key}
        if system.species:
            made["species"] = copy.deepcopy(system.species)
        if self.chance(0.1):
            made["report_in"] = self.report_in()
        if self.chance(0.1):
            made["atmospheric_pressure"] = self.rnd.choice(
                ["100 kPa", "1 atm", "0.9 bar", "1e-6 Pa", "1e12 Pa"]
            )
        return made

    def report_in(self) -> Json:
        units = {
            "molar_flow": ["mol/s", "Nm3/h", "MMscfd", "(ng/kt)^5 mol/s", "(kt/ng)^5 mol/s"],
            "temperature": ["degC", "degF", "K", "mK"],
            "pressure": ["barg", "psig", "Pa", "(ng/kt)^5 Pa"],
            "volumetric_flow": ["l/s", "gpm"],
            "concentration": ["mol/l", "lbmol/ft3"],
            "time": ["s", "week"],
            "amount": ["mol"],
            "volume": ["l"],
            "frequency": ["1/s", "Hz"],
            "reaction_rate": ["mol/(l s)"],
            "reaction_rate_per_mass": ["kmol/(t h)"],
        }
        chosen = self.rnd.sample(sorted(units), self.rnd.randint(0, 4))
        return {name: self.rnd.choice(units[name]) for name in chosen}

    def conditions(self, stream: dict[str, Any], p: float = 0.6) -> None:
        if self.chance(p):
            t = self.rnd.choice(
                [
                    "620 K",
                    "347 degC",
                    "650 degF",
                    "0.001 K",
                    "1e6 K",
                    {"value": 620, "unit": "K", "u": 0},
                ]
            )
            stream["temperature"] = t
            stream["pressure"] = self.rnd.choice(
                ["25 bar", "24 barg", "350 psig", "1e-12 Pa", "1e12 Pa", "101.325 kPa"]
            )
        if self.chance(0.1):
            stream["compressibility"] = self.rnd.choice([0.9, 1e-9, 10])

    # -- streams of a known account

    def as_flows(self, system: System, flows: dict[str, float], u: str | None) -> dict[str, Any]:
        made: dict[str, Any] = {"phase": system.phase, "flows": {}}
        for n, f in flows.items():
            if self.chance(0.15):
                made["flows"][n] = self.quantity(f * system.masses[n], "kg/h", u)
            else:
                made["flows"][n] = self.quantity(f, "kmol/h", u)
        return made

    def as_analysis(
        self, system: System, flows: dict[str, float], u: str | None
    ) -> tuple[dict[str, Any], bool]:
        """Return a stream that states analyses of the flows, and whether it is free of noise."""
        stream, true = self.as_one_analysis(system, flows, u)
        if self.chance(0.2) and "analysis" in stream:
            several = [stream["analysis"]]
            for _ in range(self.rnd.randint(0, 2)):
                other, no_noise = self.as_one_analysis(system, flows, u)
                if "analysis" in other:
                    several.append(other["analysis"])
                    true = true and no_noise
                    if "volumetric_flow" in other:
                        stream.setdefault("volumetric_flow", other["volumetric_flow"])
            stream["analysis"] = several
        return stream, true

    def as_one_analysis(
        self, system: System, flows: dict[str, float], u: str | None
    ) -> tuple[dict[str, Any], bool]:
        """Return a stream that states one analysis of the flows."""
        rnd = self.rnd
        true = True
        present = {n: f for n, f in flows.items() if f > 0} or dict(flows)
        names = list(flows)
        removed: list[Json] = []
        gone: set[str] = set()
        basis = rnd.choice(["mole", "mole", "mole", "mass", "volume", "concentration"])
        if system.phase == "liquid" and basis == "volume":
            basis = "mass"
        sample = dict(flows)
        for n in names:
            if len(gone) < len(present) - 1 and self.chance(0.15):
                gone.add(n)
                sample.pop(n)
        weights = {n: (system.masses[n] if basis == "mass" else 1.0) for n in sample}
        total = sum(f * weights[n] for n, f in sample.items())
        if not total > 0:
            return self.as_flows(system, flows, u), True
        shares = {n: f * weights[n] / total for n, f in sample.items()}
        removed += sorted(gone)
        values: dict[str, Any] = {}
        analysis: dict[str, Any] = {"basis": basis, "values": values}
        left = list(shares)
        if removed:
            analysis["removed"] = removed
        if basis == "concentration":
            # some volume of 1000 m3/h (at conditions of nothing in particular)
            for n in left:
                if self.chance(0.85):
                    values[n] = self.quantity(flows[n] / 1000.0, "kmol/m3", u)
            if not values:
                values[left[0]] = self.quantity(flows[left[0]] / 1000.0, "kmol/m3", u)
            stream: dict[str, Any] = {
                "phase": system.phase,
                "analysis": analysis,
                "volumetric_flow": "1000 m3/h",
            }
            if removed:
                true = False
            return stream, true
        if self.chance(0.2) and len(left) > 1:
            balance = rnd.choice(left)
            analysis["balance"] = balance
            left.remove(balance)
        if self.chance(0.15) and len(left) > 2:
            pair = rnd.sample(left, 2)
            name = "+".join(pair)
            w = [1, 1] if self.chance(0.7) else [self.spread(1e-3, 1e3), 1]
            analysis["lumps"] = {name: dict(zip(pair, w, strict=True))}
            share = sum(shares[n] * x for n, x in zip(pair, w, strict=True))
            if share <= 1:
                values[name] = self.quantity(share, "", u)
                left = [n for n in left if n not in pair]
            else:
                del analysis["lumps"]
        for n in left:
            if len(left) > 1 and self.chance(0.12):
                continue  # not analysed
            x = shares[n]
            unit = rnd.choice(["%", "", "ppm"])
            per = {"%": 100.0, "": 1.0, "ppm": 1e6}[unit]
            if x < 1e-3 and self.chance(0.4):
                values[n] = f"<{0.05} %"
                true = False
            else:
                values[n] = self.quantity(min(x, 1.0) * per, unit, u)
        if not values:
            values[left[0] if left else names[0]] = "10 %"
            true = False
        if self.chance(0.1):
            analysis["normalised"] = True
            if "balance" in analysis:
                true = False
        stream = {"phase": system.phase, "analysis": analysis}
        if self.chance(0.5):
            stream["flow"] = self.quantity(sum(flows.values()), "kmol/h", u)
            if self.chance(0.3):
                stream["flow"] = self.quantity(sum(sample.values()), "kmol/h", u)
                stream["flow_basis"] = "as-analysed"
        if system.phase == "gas" and self.chance(0.1) and "flow" in stream:
            t, p = 300.0, 2e5
            whole = sum((sample if stream.get("flow_basis") else flows).values())
            stream["flow"] = self.quantity(whole * 1000 * 8.31446261815324 * t / p, "m3/h", u)
            stream["meter"] = {"temperature": "300 K", "pressure": "2 bar"}
        elif system.phase == "gas" and self.chance(0.2) and "flow" in stream:
            passing = sample if stream.get("flow_basis") else flows
            stream.update(self.by_design(system, passing, u))
        return stream, true

    def by_design(self, system: System, passing: dict[str, float], u: str | None) -> dict[str, Any]:
        """Return the flow that a differential-pressure meter shows, and the meter."""
        rnd = self.rnd
        moles = sum(passing.values())
        molar_mass = sum(f * system.masses[n] for n, f in passing.items()) / moles
        t, p, z = rnd.uniform(280, 500), rnd.uniform(1, 30), rnd.choice([1.0, 0.9])
        td, pd, zd = rnd.uniform(280, 500), rnd.uniform(1, 30), rnd.choice([1.0, 0.95])
        md = molar_mass * rnd.uniform(0.5, 2)
        compensated = rnd.sample(["temperature", "pressure"], rnd.randint(0, 2))
        density = p * molar_mass / (z * t)
        of_design = (
            (p if "pressure" in compensated else pd)
            * md
            / (zd * (t if "temperature" in compensated else td))
        )
        mass = moles * molar_mass * math.sqrt(of_design / density)
        design = {"molar_mass": f"{md!r} g/mol", "compressibility": zd}
        meter: dict[str, Any] = {"compressibility": z, "design": design}
        kind = rnd.choice(["kmol/h", "kg/h", "m3/h"])
        for name, at, of, unit in (("temperature", t, td, "K"), ("pressure", p, pd, "bar")):
            if name not in compensated or kind == "m3/h" or self.chance(0.3):
                meter[name] = f"{at!r} {unit}"
            if name not in compensated or self.chance(0.3):
                design[name] = f"{of!r} {unit}"
        if compensated or self.chance(0.1):
            meter["compensated"] = compensated
        shown = {
            "kmol/h": mass / md,
            "kg/h": mass,
            # kg/h over kg/m3, from kg/kmol, bar and K
            "m3/h": mass / (of_design * 1e5 / 8314.46261815324),
        }[kind]
        return {"flow": self.quantity(shown, kind, u), "meter": meter}

    def side(
        self, system: System, flows: dict[str, float], analysed: float, u: str | None
    ) -> tuple[dict[str, Any], bool]:
        if self.chance(0.12) and len(flows) > 1:
            share = self.rnd.random()
            one = {n: f * share for n, f in flows.items()}
            other = {n: f - one[n] for n, f in flows.items()}
            streams, true = [], True
            for part in (one, other):
                s, t = (
                    self.as_analysis(system, part, u)
                    if self.chance(0.5)
                    else (self.as_flows(system, part, u), True)
                )
                if self.chance(0.5):
                    s["id"] = f"s{len(streams)}"
                streams.append(s)
                true = true and t and not any(a.get("removed") for a in _analyses(s))
            return {"phase": system.phase, "streams": streams}, true
        if self.chance(analysed):
            return self.as_analysis(system, flows, u)
        return self.as_flows(system, flows, u), True

    def around(
        self, system: System, flows: dict[str, float], u: str | None, quiet: float
    ) -> tuple[dict[str, Any], bool]:
        """Return a stream around a reactor with recycle, perhaps of no more than its phase."""
        if self.chance(quiet):
            return {"phase": system.phase}, True
        out = {n: f for n, f in flows.items() if f > 0 or self.chance(0.5)} or flows
        stream, true = self.as_analysis(system, out, u)
        if self.chance(0.4):
            stream, true = self.as_flows(system, out, u), True
        there = {n for n, f in flows.items() if f > 0}
        return stream, true and there <= _named(stream) | set(self.removed(stream))

    def removed(self, stream: Json) -> list[str]:
        return [
            gone if isinstance(gone, str) else gone["species"]
            for analysis in _analyses(stream)
            for gone in analysis.get("removed", ())
        ]

    def recycled(self) -> tuple[Json, float | None]:
        """Return a conversion with recycle, and the conversion per pass where it is known."""
        rnd = self.rnd
        system, fed, leaving, _extents = self.account()
        made = self.base(system)
        u = rnd.choice(["rel", "abs", "zero", "tiny", "text", "huge"])
        kind = rnd.choice(["both", "purge", "product"])
        split = self.spread(1e-3, 10)
        if kind == "purge":
            returned = {n: f / split for n, f in leaving.items()}
        else:
            returned = {n: f * self.spread(0.01, 10) for n, f in leaving.items()}
        most = min((f / returned[n] for n, f in leaving.items() if returned[n]), default=1.0)
        if kind == "both":
            split = most * rnd.random()
        purge = {n: f * (split if kind != "product" else 0.0) for n, f in returned.items()}
        product = {n: max(0.0, f - purge[n]) for n, f in leaving.items()}
        inlet = {n: fed.get(n, 0.0) + f for n, f in returned.items()}
        outlet = {n: leaving[n] + f for n, f in returned.items()}
        made["fresh_feed"], true = self.side(system, fed, 0.3, u)
        if _named(made["fresh_feed"]) != set(fed) or self.removed(made["fresh_feed"]):
            true = False
        flows = {"feed": inlet, "outlet": outlet, "recycle": returned}
        if kind != "product":
            flows["purge"] = purge
        if kind != "purge":
            flows["product"] = product
        for name, of in flows.items():
            made[name], told = self.around(system, of, u, 0.5 if name == "feed" else 0.3)
            true = true and told
        for name in made.keys() & {"feed", "outlet", "recycle"}:
            self.conditions(made[name], 0.2)
            true = true and not (made[name].get("volumetric_flow") and "temperature" in made[name])
        if self.wild and self.chance(0.1):
            made.pop(rnd.choice(["fresh_feed", "recycle", "feed", *(made.keys() & {"purge"})]))
            true = False
        if any("phase" in said for said in system.species.values()):
            true = False  # what is of another phase travels only where it is read
        if b"kg/h" in dumps(made) and u not in ("rel", "abs", "text"):
            true = False  # molar masses to five digits are not exact enough for exact readings
        truth = (inlet[system.key] - outlet[system.key]) / inlet[system.key]
        if self.chance(0.3):
            self.corrupt(made)
            true = False
        self.further(made)
        return made, truth if true else None

    def conversion(self) -> tuple[Json, float | None]:
        if self.chance(0.25):
            return self.recycled()
        system, fed, left, _extents = self.account()
        made = self.base(system)
        u = self.rnd.choice([None, "rel", "abs", "zero", "tiny", "text"])
        made["feed"], t1 = self.side(system, fed, 0.3, u)
        if _named(made["feed"]) != set(fed):
            t1 = False  # what the feed does not name is taken not to be there
        if any(a.get("removed") for a in _analyses(made["feed"])):
            t1 = False  # what was removed from the sample of a feed is taken not to be there
        out = {n: f for n, f in left.items() if f > 0 or self.chance(0.5)} or left
        made["outlet"], t2 = self.side(system, out, 0.8, u)
        for side in ("feed", "outlet"):
            self.conditions(made[side], 0.3)
            if (
                "streams" not in made[side]
                and made[side].get("volumetric_flow")
                and "temperature" in made[side]
            ):
                t1 = False
        if self.chance(0.3):
            made["yields"] = self.rnd.choice(
                [
                    {},
                    {"basis": "element", "element": "C"},
                    {"basis": "key"},
                    {"basis": "element"},
                    {"basis": "element", "element": "H"},
                    {"per_key": {system.key: 1}},
                ]
            )
        truth = (fed[system.key] - left[system.key]) / fed[system.key] if fed[system.key] else None
        if self.chance(0.3):
            self.corrupt(made)
            t1 = False
        self.further(made)
        if self.gas_model(made, system):
            t1 = False
        return made, truth if t1 and t2 else None

    def further(self, made: Json) -> None:
        """State what is asked for beside the account, and of its errors."""
        if self.chance(0.2):
            made["reactor"] = self.rnd.choice(
                [
                    {"volume": "12 m3"},
                    {"volume": {"value": 12, "unit": "m3", "u_rel": self.rnd.choice([0.02, 0.6])}},
                    {"catalyst_mass": "9.5 t"},
                    {"catalyst_mass": "9.5 t", "time": "2 h"},
                ]
            )
        if self.chance(0.2):
            made["uncertainty"] = {"coverage": self.rnd.choice([0.51, 0.9, 0.9999, 0.95])}
        if self.chance(0.25):
            made["correlations"] = self.correlations(made)
        if self.chance(0.08):
            made["uncertainty"] = {
                "method": "monte-carlo",
                "draws": self.rnd.choice([200, 300, 500]),
                "seed": self.rnd.randrange(2**53),
            }
            if self.chance(0.3):
                made["uncertainty"]["coverage"] = self.rnd.choice([0.6, 0.9, 0.95, 0.98])

    def correlations(self, made: Json) -> list[Json]:
        """Return correlations between readings of a document, some of which cannot be."""
        rnd = self.rnd
        pointers = [
            f"{place}/{form}/{name}"
            for side in self.sides(made)
            for place, stream in self.placed(made[side], f"/{side}")
            for form, holder in (
                ("flows", stream.get("flows", {})),
                *(
                    (
                        f"analysis{'' if isinstance(stream['analysis'], dict) else f'/{k}'}/values",
                        analysis["values"],
                    )
                    for k, analysis in enumerate(_analyses(stream))
                ),
            )
            for name in (str(n).replace("~", "~0").replace("/", "~1") for n in holder)
        ]
        pointers += [f"/{side}/flow" for side in self.sides(made) if "flow" in made[side]]
        if self.chance(0.1) or len(pointers) < 2:
            pointers += ["/feed/temperature", "/outlet/pressure", "/feed", "/nowhere"]
        return [
            {
                "readings": [rnd.choice(pointers), rnd.choice(pointers)]
                if self.chance(0.1)
                else rnd.sample(pointers, 2),
                "coefficient": rnd.choice([-1, -0.7, -0.2, 0, 0.3, 0.3, 0.5, 0.9, 1, 1 - 1e-12]),
            }
            for _ in range(rnd.choice([1, 1, 2, 4]))
        ]

    @staticmethod
    def sides(made: Json) -> list[str]:
        """Return the names of the streams that a document states."""
        names = ("feed", "outlet", "fresh_feed", "recycle", "purge", "product")
        return [name for name in names if name in made]

    @staticmethod
    def placed(side: Json, pointer: str) -> list[tuple[str, Json]]:
        """Return the streams of a side and where each stands."""
        if "streams" not in side:
            return [(pointer, side)]
        return [(f"{pointer}/streams/{k}", one) for k, one in enumerate(side["streams"])]

    def gas_model(self, made: Json, system: System) -> bool:
        """Name a gas model now and then; what counts by volume is not true then.

        By chances of its own, so that the other requests of a seed stay what they are.
        """
        rnd = random.Random(json.dumps(made, sort_keys=True))
        if rnd.random() > (0.3 if system.phase == "gas" else 0.03):
            return False
        made["gas_model"] = rnd.choice(["peng-robinson", "soave-redlich-kwong", "ideal"])
        if rnd.random() < 0.2:
            names = [*made["feed"].get("flows", {}), "N2", "CO"]
            made["interactions"] = [
                {
                    "between": [rnd.choice(names), rnd.choice(names)],
                    "parameter": rnd.choice([0.1, -1, 1, 0]),
                }
            ]
        meters = [made[side] for side in ("feed", "outlet") if side in made]
        for stream in meters:
            if "meter" in stream and rnd.random() < 0.5:
                stream["meter"].pop("compressibility", None)
                stream["meter"]["pressure"] = rnd.choice(["2 bar", "180 bar", "1e9 Pa"])
                stream["meter"].setdefault("temperature", "310 K")
            if "analysis" in stream and rnd.random() < 0.3:
                stream["temperature"], stream["pressure"] = "350 K", "60 bar"
        return True

    def corrupt(self, made: Json) -> None:
        """Put one reading wrong: a gross error."""
        readings = [
            (holder, name)
            for side in ("feed", "outlet", "fresh_feed", "recycle", "purge", "product")
            if side in made
            for stream in made[side].get("streams", [made[side]])
            for holder in (stream.get("flows", {}), *(a["values"] for a in _analyses(stream)))
            for name in holder
        ]
        if not readings:
            return
        holder, name = self.rnd.choice(readings)
        said = holder[name]
        factor = self.rnd.choice([1.2, 0.5, 10, 0, 1e6, -1])
        if isinstance(said, dict) and "value" in said:
            said["value"] *= factor
        elif isinstance(said, str) and (m := re.match(r"[-+0-9.e]+", said)):
            holder[name] = f"{float(m[0]) * factor!r}{said[m.end() :]}"

    def table(self) -> tuple[Json, float | None]:
        system, fed, _left, extents = self.account()
        made = self.base(system)
        u = self.rnd.choice(["text", "plain", None])
        feed, _ = self.side(system, fed, 0.2, u)
        made["feed"] = feed
        self.conditions(feed)
        if self.chance(0.2) and "flows" in feed:
            feed["amounts"] = {n: self.quantity(f, "kmol", "text") for n, f in fed.items()}
            del feed["flows"]
            if self.chance(0.3):
                made["hold"] = self.rnd.choice(["volume", "pressure"])
            if self.chance(0.3):
                feed["volume"] = self.rnd.choice(["5 m3", "1e-12 m3", "1e12 m3"])
        if self.chance(0.15):
            feed.setdefault("density", "900 kg/m3")
        if len(system.reactions) > 1 or self.chance(0.2):
            unit = "kmol" if "amounts" in feed else "kmol/h"
            ids = [
                r["id"] if isinstance(r, dict) else f"r{i + 1}"
                for i, r in enumerate(made["reactions"])
            ]
            made["extents"] = {i: f"{xi!r} {unit}" for i, xi in zip(ids, extents, strict=True)}
            if self.chance(0.2) and len(system.reactions) > 1:
                del made["extents"]
                made["conversions"] = [self.rnd.random()]
        else:
            count = self.rnd.choice([1, 1, 3, 21, 1000]) if self.chance(0.3) else 1
            made["conversions"] = [
                self.rnd.choice([0, 1, self.rnd.random(), "60 %", -0.1, 1e-300])
                for _ in range(count)
            ]
        if self.chance(0.3):
            made["outlet"] = {}
            for name, values in (
                ("temperature", ["800 K", "1e6 K", "0.001 K"]),
                ("pressure", ["1 bar", "1e-12 Pa", "0.1 barg"]),
                ("compressibility", [1.2, 1e-9]),
            ):
                if self.chance(0.5):
                    made["outlet"][name] = self.rnd.choice(values)
        self.gas_model(made, system)
        return made, None

    def correlation(self, unit: str) -> Json:
        """Return an equilibrium constant by a sum of terms, of any size and sense."""
        rnd = self.rnd
        terms = {
            "constant": rnd.choice([0, 1, -12.3, 700, -1e6]),
            "log_temperature": rnd.choice([0, -1.5, 2, 1e4]),
            "inverse_temperature": rnd.choice(["5000 K", "-2e4 K", "9e3 degR", "0 K", "1e15 K"]),
            "inverse_temperature_squared": rnd.choice(["1e6 K2", "-3e5 K^2", "0 K2"]),
            "temperature": rnd.choice(["1e-3 1/K", "-2e-2 1/K", "1 K"]),
            "temperature_squared": rnd.choice(["1e-7 1/K2", "1e-60 1/K^2", "1e10 1/K2"]),
        }
        kept = {name: term for name, term in terms.items() if self.chance(0.35)}
        made: dict[str, Json] = {rnd.choice(["ln", "log10"]) + "_coefficients": kept}
        if unit or self.chance(0.3):
            made["unit"] = unit or "1"
        if self.chance(0.3):
            made["between"] = rnd.sample(["300 K", "600 degC", "1e6 K", "5 bar"], 2)
        if self.chance(0.2):
            made["standard_pressure"] = rnd.choice(["1 atm", "1 bar", "0 Pa"])
        return made

    def equilibrium(self) -> tuple[Json, float | None]:
        rnd = self.rnd
        system, fed, left, _ = self.account()
        made = self.base(system)
        constants: list[Json] = [
            {"from": "thermochemistry"},
            {"from": "thermochemistry"},
            rnd.choice([2.5, 1e-12, 1e12, "0.3 bar^-2", "2 m3/kmol"]),
            {"at": "600 K", "constant": rnd.choice([0.1, 40]), "enthalpy": "-40 kJ/mol"},
            self.correlation(""),
        ]
        made["reactions"] = [
            {**(r if isinstance(r, dict) else {"equation": r}), "equilibrium_constant": k}
            for r, k in zip(
                made["reactions"], rnd.choices(constants, k=len(made["reactions"])), strict=True
            )
        ]
        if self.chance(0.15):
            self.state_properties(made, list(fed))
        measured = self.chance(0.25)
        made["feed"], _ = self.side(system, fed, 0.2, rnd.choice([None, "text", "rel"]))
        self.conditions(made["feed"], 0.9)
        if measured:
            made["outlet"], _ = self.side(system, left, 0.7, rnd.choice([None, "rel", "zero"]))
            self.conditions(made["outlet"], 0.95)
        if self.chance(0.3) and "flows" in made["feed"]:
            made["feed"]["amounts"] = {n: f"{f!r} kmol" for n, f in fed.items()}
            del made["feed"]["flows"]
        if self.chance(0.5):
            made["hold"] = rnd.choice(
                ["temperature-pressure", "temperature-volume", "enthalpy-pressure", "energy-volume"]
            )
        if self.chance(0.3):
            made["at"] = rnd.choice(
                [
                    {"temperature": "900 K"},
                    {"temperature": "300 K", "pressure": "300 bar"},
                    {"volume": rnd.choice(["1 ml", "20 m3", "1e9 m3"])},
                    {"pressure": "1e-9 Pa"},
                ]
            )
        if self.chance(0.3):
            made["gas_model"] = rnd.choice(["ideal", "peng-robinson", "soave-redlich-kwong"])
            if self.chance(0.3):
                pair = rnd.choices(list(fed), k=2)
                made["interactions"] = [{"between": pair, "parameter": rnd.choice([0, 0.1, -1, 1])}]
        if self.chance(0.3):
            made["sweep"] = rnd.choice(
                [
                    {"over": "temperature", "from": "400 K", "to": "1200 K", "points": 7},
                    {"over": "temperature", "from": "900 K", "to": "300 K", "points": 2},
                    {"over": "temperature", "from": "10 K", "to": "1e4 K", "points": 20},
                    {"over": "pressure", "from": "1 Pa", "to": "1 kbar", "spacing": "logarithmic"},
                    {"over": "pressure", "from": "0 barg", "to": "90 barg", "points": 500},
                ]
            )
        return made, None

    def state_properties(self, made: dict[str, Any], names: list[str]) -> None:
        """State properties of some substances, in a request's own declaration of them."""
        rnd = self.rnd
        for name in names:
            if self.chance(0.5):
                continue
            said = made.setdefault("species", {}).setdefault(name, {})
            said["enthalpy_of_formation"] = rnd.choice(
                (5 * ["-110 kJ/mol", "0 J/mol"]) + ["1e9 kJ/mol"]
            )
            third = rnd.choice(["entropy", "entropy", "gibbs_of_formation"])
            said[third] = {
                "entropy": rnd.choice((5 * ["200 J/(mol K)", "50 cal/(mol K)"]) + ["-1 J/(mol K)"]),
                "gibbs_of_formation": rnd.choice(["-90 kJ/mol", "20 kcal/mol"]),
            }[third]
            said["heat_capacity"] = rnd.choice(
                [
                    "30 J/(mol K)",
                    "1e-9 J/(mol K)",
                    {"coefficients": [25, 0.01, -1e-6], "unit": "J/(mol K)"},
                    {"coefficients": [25, 1e5], "powers": [0, -2], "unit": "cal/(mol K)"},
                    {
                        "coefficients": [25, -0.05],
                        "unit": "J/(mol K)",
                        "between": ["300 K", "700 K"],
                    },
                ]
            )
            if self.chance(0.1):
                said["registry_number"] = rnd.choice(["630-08-0", "7732-18-5", "106-97-8"])
            if self.chance(0.1):
                said["name"] = rnd.choice(["water", "isobutane", "x", " butane "])

    def volume(self) -> tuple[Json, float | None]:
        rnd = self.rnd
        system, fed, _left, _ = self.account()
        text, nu = system.reactions[0]
        made = self.base(system)
        names = list(fed)
        orders: dict[str, float] = {}
        for n in nu:
            if self.chance(0.6):
                orders[n] = (
                    rnd.choice([1, 1, 2, 0, 0.5, -1, -0.5, 3, 1.5])
                    if self.chance(0.8)
                    else rnd.choice([10, -10, 4.25, 1e-9])
                )
        if nu.get(system.key) and self.chance(0.7):
            orders[system.key] = rnd.choice([1, 1, 2, 0.5, 0])
        driving = rnd.choice(
            [
                "concentration",
                "concentration",
                "mole-fraction",
                "partial-pressure" if system.phase == "gas" else "mole-fraction",
            ]
        )
        total = sum(orders.values())
        k = self.spread(1e-6, 1e6) if self.chance(0.7) else self.spread(1e-90, 1e15)
        per = {
            "concentration": f"(m3/mol)^({_fraction(total - 1)}) 1/s",
            "partial-pressure": f"mol/(m3 s) bar^({_fraction(-total)})",
            "mole-fraction": "mol/(m3 s)",
        }[driving]
        if driving == "concentration":
            per = (
                "1/s"
                if total == 1
                else f"mol^({_fraction(1 - total)}) m^({_fraction(3 * (total - 1))})/s"
            )
        if driving == "partial-pressure":
            per = "mol/(m3 s)" if total == 0 else f"mol m^-3 s^-1 bar^({_fraction(-total)})"
        constant: Json = f"{k:.12g} {per}"
        if self.chance(0.2):
            constant = {
                "at": rnd.choice(["600 K", "1 K"]),
                "constant": constant,
                "activation_energy": rnd.choice(
                    ["50 kJ/mol", "0 J/mol", "-1e6 kJ/mol", "500 kJ/mol"]
                ),
            }
        elif self.chance(0.15):
            constant = {
                "pre_exponential": constant,
                "activation_energy": rnd.choice(["50 kJ/mol", "0 J/mol", "9000 kJ/mol"]),
                "temperature_exponent": rnd.choice([0, 1, -10, 10, 0.5]),
            }
        rate: dict[str, Any] = {
            "per": "fluid-volume",
            "driving": driving,
            "orders": orders,
            "constant": constant,
            "of": system.key,
        }
        reaction: dict[str, Any] = {"equation": text, "rate": rate}
        if self.chance(0.35):
            if self.chance(0.5):
                rate["reversible"] = rnd.choice(
                    [
                        {},
                        {"affinity_exponent": 1},
                        {"affinity_exponent": 0.5},
                        {"affinity_exponent": 10},
                    ]
                )
                # ln K_p = 0 whatever the unit: bar to the change of moles
                change = sum(nu.values())
                unit = (
                    rnd.choice(
                        ["", f"bar^({_fraction(change)})", f"(kmol/m3)^({_fraction(change)})"]
                    )
                    if change
                    else ""
                )
                reaction["equilibrium_constant"] = f"{self.spread(1e-6, 1e6):.6g} {unit}".strip()
                if self.chance(0.3):
                    reaction["equilibrium_constant"] = self.correlation(unit)
                elif self.chance(0.6):
                    reaction["equilibrium_constant"] = {"from": "thermochemistry"}
                    self.state_properties(made, names)
            else:
                back = {
                    n: rnd.choice([1, 2, 0.5]) for n, c in nu.items() if c > 0 and self.chance(0.8)
                }
                t2 = sum(back.values())
                per2 = {
                    "concentration": "1/s"
                    if t2 == 1
                    else f"mol^({_fraction(1 - t2)}) m^({_fraction(3 * (t2 - 1))})/s",
                    "partial-pressure": "mol/(m3 s)"
                    if t2 == 0
                    else f"mol m^-3 s^-1 bar^({_fraction(-t2)})",
                    "mole-fraction": "mol/(m3 s)",
                }[driving]
                rate["reversible"] = {
                    "constant": f"{self.spread(1e-6, 1e6):.6g} {per2}",
                    "orders": back,
                }
        if any(o < 0 for o in orders.values()) and self.chance(0.7):
            unit = {"concentration": "mol/m3", "partial-pressure": "Pa", "mole-fraction": ""}[
                driving
            ]
            rate["floor"] = {
                n: f"{rnd.choice([1, 1e-3, 1e-12, 1e3])} {unit}".strip()
                for n, o in orders.items()
                if o < 0
            }
        if self.chance(0.1):
            rate["activity"] = rnd.choice([1e-9, 10, 0.5])
        if self.chance(0.3):
            self.state_properties(made, names)
            reaction["enthalpy"] = {
                "heat": rnd.choice(["-98 kJ/mol", "40 kcal/mol", "0 J/mol", "1e9 kJ/mol"]),
                "of": rnd.choice(names),
                "at": rnd.choice(["298.15 K", "25 degC", "600 K", "1 K", "4000 K"]),
            }
        made["reactions"] = [reaction]
        feed: dict[str, Any] = {"phase": system.phase}
        kind = rnd.choice(["plug-flow", "stirred-tank", "tanks-in-series", "batch"])
        reactor: dict[str, Any] = {"kind": kind}
        if kind == "tanks-in-series":
            reactor["number"] = rnd.choice([1, 2, 3, 10, 100])
        batch = kind == "batch" and self.chance(0.95)
        form, unit = ("amounts", "kmol") if batch else ("flows", "kmol/h")
        feed[form] = {n: f"{fed[n]!r} {unit}" for n in names}
        if system.phase == "gas":
            feed["temperature"], feed["pressure"] = rnd.choice(
                [
                    ("600 K", "2 bar"),
                    ("1e6 K", "1e12 Pa"),
                    ("0.001 K", "1e-12 Pa"),
                    ("347 degC", "24 barg"),
                ]
            )
        else:
            feed["temperature"] = "350 K"
            feed["volume" if batch else "volumetric_flow"] = rnd.choice(
                ["10 m3", "1 l", "1e-9 m3"]
            ) + ("" if batch else "/h")
        if kind == "batch" and self.chance(0.3):
            reactor["hold"] = rnd.choice(["volume", "pressure"])
        made["feed"], made["reactor"] = feed, reactor
        x = rnd.choice(
            [
                0.5,
                0.3,
                0.2,
                0.1,
                0.05,
                0.8,
                0.99,
                0.999999,
                1 - 1e-12,
                1,
                0,
                1e-12,
                1e-300,
                -0.1,
                rnd.random(),
                rnd.random(),
            ]
        )
        target: Json = {"conversion": x}
        if self.chance(0.25):
            which = rnd.choice(["flow", "mole_fraction", "concentration", "yield"])
            value = {
                "flow": f"{self.flow(False)!r} {unit}",
                "mole_fraction": rnd.random(),
                "concentration": f"{self.spread(1e-6, 10)!r} kmol/m3",
                "yield": rnd.random(),
            }[which]
            target = {"species": rnd.choice(list(nu) if self.chance(0.8) else names), which: value}
        made["target"] = target
        self.hinder(made, names)
        return made, None

    def hinder(self, made: Json, names: list[str]) -> None:
        """Give the rate a denominator, another basis or a pellet now and then, units mostly right.

        By chances of its own, so that the other requests of a seed stay what they are.
        """
        rnd = random.Random(json.dumps(made, sort_keys=True))
        rate = made["reactions"][0]["rate"]
        unit = {"concentration": "mol/m3", "partial-pressure": "bar", "mole-fraction": "1"}[
            rate["driving"]
        ]
        if rnd.random() < 0.2:
            rate["per"] = rnd.choice(["bed-volume", "catalyst-mass"])
            if rate["per"] == "catalyst-mass" and isinstance(rate["constant"], str):
                # Of a rate per 1 m3; wrong now and then.
                number, _, of_volume = rate["constant"].partition(" ")
                rate["constant"] = (
                    f"{number} {rnd.choice(['m3 kg^-1', 'm3 kg^-1', ''])} {of_volume}"
                )

        def factor() -> Json:
            terms = []
            for _ in range(rnd.choice([1, 2, 3])):
                order = rnd.choice([1, 0.5, 2, -1, 0])
                constant: Any = f"{10 ** rnd.uniform(-6, 6):.4g} ({unit})^{_fraction(-order)}"
                if order == 0 or unit == "1":
                    constant = rnd.choice([2.5, 1e-9, 1e9])
                if rnd.random() < 0.4:
                    energy = rnd.choice(["adsorption_enthalpy", "activation_energy"])
                    constant = {"at": "500 K", "constant": constant, energy: "-40 kJ/mol"}
                terms.append({"constant": constant, "orders": {rnd.choice(names): order}})
            made: Json = {"terms": terms}
            if rnd.random() < 0.5:
                made |= {"leading": rnd.choice([0, 1, 1e6]), "power": rnd.choice([1, 2, 0.3, 10])}
            return made

        if rnd.random() < 0.3:
            rate["denominator"] = rnd.choice([factor(), [factor(), factor()]])
        elif rnd.random() < 0.1:
            rate["effectiveness"] = {
                "geometry": rnd.choice(["sphere", "cylinder", "slab"]),
                "size": rnd.choice(["2 mm", "1e-9 m", "1e6 m"]),
                "diffusivity": rnd.choice(["1e-9 m2/s", "1e-30 m2/s", "1e30 cm2/s"]),
                **rnd.choice(
                    [
                        {},
                        {"void_fraction": 0.4},
                        {"void_fraction": 1},
                        {"particle_density": "1 t/m3"},
                    ]
                ),
            }

    # -- documents made from the schema alone

    def from_schema(self, schema: Json, name: str = "", depth: int = 0) -> Json:
        rnd = self.rnd
        schema = resolve(schema)
        for union in ("anyOf", "oneOf"):
            if union in schema:
                return self.from_schema(rnd.choice(schema[union]), name, depth)
        if "enum" in schema:
            return rnd.choice(schema["enum"])
        kind = schema.get("type")
        if kind == "object":
            made: dict[str, Any] = {}
            for member, inner in schema.get("properties", {}).items():
                wanted = member in schema.get("required", ())
                if wanted or rnd.random() < (0.35 if depth < 3 else 0.15):
                    made[member] = self.from_schema(inner, member, depth + 1)
            if isinstance(schema.get("additionalProperties"), dict):
                for _ in range(rnd.choice([1, 1, 2, 3, 5])):
                    made[self.name()] = self.from_schema(
                        schema["additionalProperties"], name, depth + 1
                    )
            if len(made) > schema.get("maxProperties", 10**9):
                made = dict(list(made.items())[: schema["maxProperties"]])
            return made
        if kind == "array":
            return [
                self.from_schema(schema["items"], name, depth + 1)
                for _ in range(rnd.choice([1, 1, 2, 3]))
            ]
        if kind == "integer":
            return rnd.choice([schema.get("minimum", 0), schema.get("maximum", 100), 3, 3.0])
        if kind == "number":
            low = schema.get("minimum", schema.get("exclusiveMinimum", -1e15))
            high = schema.get("maximum", 1e15)
            return rnd.choice([low, high, min(max(1.0, low), high), min(max(0.5, low), high)])
        if kind == "boolean":
            return self.chance(0.5)
        if kind == "string":
            return self.text(name, schema.get("pattern", ""))
        return None

    def name(self) -> str:
        return self.rnd.choice(["CO", "H2O", "CO2", "H2", "N2", "A", "B", "O2", *NAMES[:12]])

    def text(self, name: str, pattern: str) -> str:
        rnd = self.rnd
        if name == "equation":
            return rnd.choice(
                [s.reactions[0][0] for s in SYSTEMS]
                + ["A -> B", "2 A + B -> C", "x", "->", "A=B", "e- -> e-"]
            )
        if name == "registry_number":
            return "7732-18-5"
        if name == "element":
            return rnd.choice(["C", "H", "Xx"])
        if name == "formula":
            return rnd.choice(["C2H4O2", "H2O", "X", "((H2O)2)3", "Na+", "e-"])
        if name in ("key", "species", "balance", "of", "removed", "id"):
            return self.name()
        if "[0-9]{1,20}" in pattern:
            number = rnd.choice(
                ["0", "1", "12.5", ".5", "1e-9", "1e15", "1e99", "-3", "007", "1.", "9" * 20]
            )
            made = f"{number} {rnd.choice(UNITS)}".strip()
            return made.lstrip("-") if "[+-]?" not in pattern[:8] else made
        return rnd.choice(UNITS) or "1"

    # -- mutation

    def places(self, document: Json) -> list[tuple[Any, Any]]:
        """Every (holder, name or index)."""
        found: list[tuple[Any, Any]] = []

        def walk(node: Json) -> None:
            items = (
                node.items()
                if isinstance(node, dict)
                else enumerate(node)
                if isinstance(node, list)
                else ()
            )
            for k, v in list(items):
                found.append((node, k))
                walk(v)

        walk(document)
        return found

    def schema_places(self, document: Json, schema: Json) -> list[tuple[dict[str, Any], Json]]:
        """Objects of the document whose schema is known."""
        found: list[tuple[dict[str, Any], Json]] = []

        def walk(node: Json, schema: Json) -> None:
            schema = resolve(schema)
            for union in ("anyOf", "oneOf"):
                if union in schema:
                    for inner in schema[union]:
                        inner = resolve(inner)
                        fits = (
                            isinstance(node, dict)
                            and inner.get("type") == "object"
                            and set(inner.get("required", ())) <= set(node)
                        )
                        if fits or (isinstance(node, list) and inner.get("type") == "array"):
                            walk(node, inner)
                            return
                    return
            if isinstance(node, dict) and schema.get("type") == "object":
                found.append((node, schema))
                for k, v in node.items():
                    inner = schema.get("properties", {}).get(k, schema.get("additionalProperties"))
                    if isinstance(inner, dict):
                        walk(v, inner)
            elif isinstance(node, list) and schema.get("type") == "array":
                for v in node:
                    walk(v, schema["items"])

        walk(document, schema)
        return found

    def mutate(self, route: str, document: Json) -> Json:
        rnd = self.rnd
        places = self.places(document)
        if not places:
            return document
        holder, name = rnd.choice(places)
        value = holder[name]
        what = rnd.randrange(22)
        if what == 0:
            del holder[name]
        elif what == 1 and isinstance(holder, dict):
            new = rnd.choice(
                [name.upper(), name + "s", name[:-1] or "q", rnd.choice(NAMES), rnd.choice(CONTROL)]
            )
            holder[new] = holder.pop(name)
        elif what == 2:
            holder[name] = rnd.choice(
                [
                    None,
                    True,
                    False,
                    [],
                    {},
                    "",
                    0,
                    "x",
                    [value],
                    {"value": value},
                    "1",
                    1.5,
                    [[]],
                    {"": {}},
                ]
            )
        elif what == 3:
            number = rnd.choice(NUMBERS)
            if isinstance(value, dict) and "value" in value:
                value["value"] = number
            elif isinstance(value, str) and (m := re.match(r"[<>]?[-+0-9.eE]+", value)):
                holder[name] = f"{number}{value[m.end() :]}"
            elif isinstance(value, int | float):
                holder[name] = number
        elif what == 4:
            if isinstance(value, dict) and "value" in value:
                value["unit"] = rnd.choice(UNITS)
            elif isinstance(value, str) and (m := re.match(r"[<>]?[-+0-9.eE]+", value)):
                holder[name] = f"{m[0]} {rnd.choice(UNITS)}".strip()
        elif what == 5:
            choice = rnd.choice([0, 1e-300, 1e-12, 1e15, 1e3, 1])
            for h, k in places:
                if isinstance(h[k], dict) and "value" in h[k]:
                    for old in ("u", "u_rel", "u_shared"):
                        h[k].pop(old, None)
                    h[k]["u"] = choice
        elif what == 6:
            for h, k in places:
                if (
                    isinstance(h[k], str)
                    and (m := re.fullmatch(r"([-+0-9.eE]+)( .*)?", h[k]))
                    and k not in ("u",)
                ):
                    with contextlib.suppress(ValueError):
                        h[k] = {"value": float(m[1]), "unit": (m[2] or "").strip(), "u": 0}
        elif what == 7 and isinstance(holder, list):
            holder.insert(rnd.randrange(len(holder) + 1), copy.deepcopy(value))
        elif what in (8, 9, 10, 11):
            objects = self.schema_places(document, request_schema(route))
            if objects:
                node, schema = rnd.choice(objects)
                members = [m for m in schema.get("properties", {}) if m not in node]
                if members:
                    member = rnd.choice(members)
                    node[member] = self.from_schema(schema["properties"][member], member, 2)
                elif isinstance(schema.get("additionalProperties"), dict):
                    node[self.name()] = self.from_schema(schema["additionalProperties"], "", 2)
        elif what == 12 and isinstance(value, dict):
            items = list(value.items())
            rnd.shuffle(items)
            holder[name] = dict(items)
        elif what in (13, 14):
            return self.rename(document)
        elif what == 15 and isinstance(value, str):
            holder[name] = rnd.choice(
                [
                    value + " ",
                    " " + value,
                    value * 3,
                    value[::-1],
                    value + "\n",
                    value.lower(),
                    rnd.choice(NAMES),
                    rnd.choice(CONTROL),
                ]
            )
        elif what == 16 and isinstance(document, dict) and "feed" in document:
            self.crowd(document)
        elif what == 17:
            other_holder, other = rnd.choice(places)
            a, b = copy.deepcopy(value), copy.deepcopy(other_holder[other])
            holder[name] = b
            with contextlib.suppress(KeyError, IndexError):
                other_holder[other] = a
        elif what == 18:
            self.tamper_analysis(document)
        elif (
            what == 19
            and isinstance(document, dict)
            and isinstance(document.get("reactions"), list)
        ):
            extra = rnd.choice(
                [
                    "CO + 3 H2 <=> CH4 + H2O",
                    "CO2 + H2 <=> CO + H2O",
                    "2 CO + 2 H2O <=> 2 CO2 + 2 H2",
                    "A <=> B",
                    "C + O2 -> CO2",
                    "H2O(l) <=> H2O",
                    "1000000/3 CO + 1000000/3 H2O <=> 1000000/3 CO2 + 1000000/3 H2",
                ]
            )
            document["reactions"] += [extra] * rnd.choice([1, 1, 2, 49])
        elif what == 20 and isinstance(document, dict):
            document["report_in"] = self.report_in()
        elif what == 21 and isinstance(holder, dict):
            holder["\x01" + name] = rnd.choice([value, 1, None])  # becomes a duplicate; see dumps
        return document

    def tamper_analysis(self, document: Json) -> None:
        rnd = self.rnd
        found = [
            h[k] for h, k in self.places(document) if k == "analysis" and isinstance(h[k], dict)
        ]
        if not found:
            return
        a = rnd.choice(found)
        values = a.get("values")
        if not isinstance(values, dict) or not values:
            return
        names = list(values)
        what = rnd.randrange(9)
        if what == 0:
            a["removed"] = names[:20]
        elif what == 1:
            a["removed"] = [
                {
                    "species": rnd.choice([*names, "H2O", "CO"]),
                    "residual": rnd.choice(
                        ["99.999 %", "100 %", "0 %", "50 %", "1e-9 %", "20 ppmv"]
                    ),
                }
                for _ in range(rnd.choice([1, 2, 3]))
            ]
        elif what == 2:
            a["balance"] = rnd.choice([*names, "H2O", "N2", "Q"])
        elif what == 3:
            a["lumps"] = {
                rnd.choice(names): {
                    rnd.choice([*names, "N2", "H2O"]): rnd.choice([1, 1e6, 1e-9])
                    for _ in range(rnd.choice([1, 2, 3]))
                }
                for _ in range(rnd.choice([1, 2]))
            }
        elif what == 4:
            a["normalised"] = True
        elif what == 5:
            a["basis"] = rnd.choice(["mole", "mass", "volume", "concentration"])
        elif what == 6:
            values[rnd.choice(names)] = rnd.choice(
                [
                    "<0.05 %",
                    ">25 %",
                    ">99.9999 %",
                    "<1e-12 %",
                    {"below": "5 %"},
                    {"above": {"value": 0.1, "u": 0.1}},
                    ">0 %",
                    "<100 %",
                    {"below": 1e-300},
                ]
            )
        elif what == 7:
            a["removed"] = [
                {
                    "species": "H2O",
                    "saturated_at": {
                        "temperature": rnd.choice(["10 degC", "99 degC", "300 degC", "1 K"]),
                        "pressure": rnd.choice(["20 bar", "1 Pa", "0 barg"]),
                    },
                }
            ]
            if rnd.random() < 0.3:
                a["removed"][0]["saturated_at"]["vapour_pressure"] = rnd.choice(
                    ["1 kPa", "1e9 bar", "1e-12 Pa"]
                )
        else:
            for n in names:
                values[n] = rnd.choice(
                    ["0 %", "<1 %", {"value": 0, "u": 0}, {"value": 50, "unit": "%", "u": 0}]
                )

    def crowd(self, document: Json) -> None:
        """Fill the feed with inert substances."""
        feed = document["feed"]
        for form in ("flows", "amounts", "concentrations"):
            if isinstance(feed, dict) and isinstance(feed.get(form), dict) and feed[form]:
                unit = {"flows": "kmol/h", "amounts": "kmol", "concentrations": "kmol/m3"}[form]
                species = document.setdefault("species", {})
                if not isinstance(species, dict):
                    return
                for i in range(100 - len(feed[form]) + self.rnd.choice([0, 0, 1])):
                    feed[form][f"S{i}"] = f"{i} {unit}"
                    if len(species) < 100:
                        species[f"S{i}"] = {"molar_mass": f"{i + 1} g/mol"}

    def rename(self, document: Json) -> Json:
        """Give a substance a hostile name everywhere, and declare it."""
        if not isinstance(document, dict):
            return document
        rnd = self.rnd
        names = sorted(_substances(document))
        if not names:
            return document
        old, new = rnd.choice(names), rnd.choice(NAMES)
        if new in names:
            return document
        formula = old

        def walk(node: Json, at: str) -> Json:
            if isinstance(node, dict):
                return {
                    (new if k == old and at in _NAMED else k): walk(v, k) for k, v in node.items()
                }
            if isinstance(node, list):
                return [walk(v, at) for v in node]
            if isinstance(node, str):
                if node == old and at in ("key", "species", "balance", "of", "removed"):
                    return new
                if at in ("equation", "reactions"):
                    return " ".join(new if t == old else t for t in node.split(" "))
            return node

        made = walk(document, "")
        species = made.setdefault("species", {})
        if isinstance(species, dict) and new not in species:
            species[new] = {"formula": formula}
        return made


_NAMED = {"species", "flows", "amounts", "concentrations", "values", "orders", "floor", "per_key"}


def _substances(document: Json) -> set[str]:
    found: set[str] = set()

    def walk(node: Json, at: str) -> None:
        if isinstance(node, dict):
            for k, v in node.items():
                if at in ("flows", "amounts", "concentrations", "values", "orders"):
                    found.add(k)
                walk(v, k)
        elif isinstance(node, list):
            for v in node:
                walk(v, at)

    walk(document, "")
    return found


def _named(stream: Json) -> set[str]:
    """Substances that a stream names outside what is removed from its sample, every part all."""
    parts = stream.get("streams", [stream])
    found = []
    for part in parts:
        names = set(part.get("flows", ()))
        for analysis in _analyses(part):
            lumps = analysis.get("lumps", {})
            names |= {analysis.get("balance", "")} - {""}
            for name in analysis["values"]:
                names |= set(lumps[name]) if name in lumps else {name}
        found.append(names)
    return set.intersection(*found)


def _analyses(stream: Json) -> list[Json]:
    """Analyses that a stream states, one or several."""
    stated = stream.get("analysis", [])
    return stated if isinstance(stated, list) else [stated]


def _fraction(x: float) -> str:
    return f"{x:.6g}"


# --------------------------------------------------------------------------- bodies


def dumps(document: Json) -> bytes:
    """Return the body; a name behind \\x01 becomes the duplicate of the name before it."""
    return (
        json.dumps(document, ensure_ascii=False)
        .replace('"\\u0001', '"')
        .encode("utf-8", "surrogatepass")
    )


def broken_text(rnd: random.Random, body: bytes) -> bytes:
    """Return a body with its text damaged."""
    what = rnd.randrange(7)
    at = rnd.randrange(len(body) + 1)
    if what == 0:
        return body[:at]
    if what == 1:
        return (
            body[:at]
            + rnd.choice(
                [
                    b"\x00",
                    b"\xff",
                    b"\xed\xa0\x80",
                    b",",
                    b"}",
                    b'"',
                    b"\xef\xbb\xbf",
                    b"NaN",
                    b"//",
                    b"\\ud800",
                ]
            )
            + body[at:]
        )
    if what == 2:
        return rnd.choice(
            [
                b"",
                b" ",
                b"null",
                b"[]",
                b"1",
                b'"x"',
                b"[" * 40 + b"]" * 40,
                b"[" * 100000,
                b'{"a":' * 33 + b"1" + b"}" * 33,
                b"1e400",
                b"-",
                b"\xef\xbb\xbf{}",
                b"{}{}",
                b"NaN",
            ]
        )
    if what == 3:
        return body.decode().encode("utf-16")
    if what == 4:
        return body.replace(b": 0", b": 1e400", 1).replace(b": 1", b": -0", 1)
    if what == 5:
        return b"\n\t " + body + b"\r\n"
    return body.replace(b'"key"', b'"\\u006bey"', 1)


def shuffled(rnd: random.Random, node: Json) -> Json:
    """Return the document with the members of every object in another order."""
    if isinstance(node, dict):
        items = [(k, shuffled(rnd, v)) for k, v in node.items()]
        rnd.shuffle(items)
        return dict(items)
    return [shuffled(rnd, v) for v in node] if isinstance(node, list) else node


def differ(a: Json, b: Json, rel: float, path: str = "") -> str | None:
    """Return where two answers differ beyond rounding, and how."""
    if isinstance(a, dict) and isinstance(b, dict):
        if set(a) != set(b):
            return f"{path}: members {sorted(set(a) ^ set(b))[:4]}"
        if (
            "value" in a
            and "unit" in a
            and isinstance(a["value"], float | int)
            and isinstance(b["value"], float | int)
        ):
            if a["unit"] != b["unit"]:
                return f"{path}: units {a['unit']} {b['unit']}"
            size = max(abs(a["value"]), abs(b["value"]), (a.get("u") or 0) * 1e3)
            noise = (
                1e-4
                if path.endswith(
                    ("adjustment_over_u", "measurement_test", "chi_square", "redundancy")
                )
                else 1e-9
            )
            if abs(a["value"] - b["value"]) > rel * size + noise:
                return f"{path}: {a['value']!r} {b['value']!r} u {a.get('u')}"
            return None
        for k in a:
            if k in (
                "digest",
                "detail",
                "expressions",
                "reading",
                "suspects",
                "removed",
                "alternatives",
            ):
                continue
            found = differ(a[k], b[k], rel, f"{path}/{k}")
            if found:
                return found
        return None
    if isinstance(a, list) and isinstance(b, list):
        if len(a) != len(b):
            return f"{path}: {len(a)} and {len(b)} entries"
        if path.endswith(("/readings", "/notes", "/assumed", "/errors")):

            def key(e):
                return str(e.get("reading") or (e.get("code"), e.get("pointer"), e.get("detail")))

            a, b = sorted(a, key=key), sorted(b, key=key)
        for i, (x, y) in enumerate(zip(a, b, strict=True)):
            found = differ(x, y, rel, f"{path}/{i}")
            if found:
                return found
        return None
    if isinstance(a, int | float) and isinstance(b, int | float) and not isinstance(a, bool):
        if abs(a - b) > rel * max(abs(a), abs(b)) + 1e-12:
            return f"{path}: {a!r} {b!r}"
        return None
    return None if a == b else f"{path}: {str(a)[:80]} {str(b)[:80]}"


# --------------------------------------------------------------------------- one thing at a time

EXTREMES = [0, -1, 5e-324, 1e-310, 1e-300, 1e-200, 1e-100, 1e-30, 1e-9, 1, 1e6, 1e12, 1e15]
SCALES = ["", " (kt/ng)^5", " (ng/kt)^5"]
"""Legal units that move a value by 90 decades."""


def sweep() -> Iterator[tuple[str, bytes]]:
    """Yield every packaged example with each number in it, one at a time, at an extreme."""
    for example in EXAMPLES:
        maker = Maker(random.Random(0))
        for at in range(len(maker.places(example.request))):
            for value in EXTREMES:
                for scale in SCALES:
                    document = copy.deepcopy(example.request)
                    holder, name = maker.places(document)[at]
                    said = holder[name]
                    if isinstance(said, dict) and "value" in said:
                        unit = f"{said.get('unit', '')}{scale}".strip()
                        holder[name] = {"value": value, "unit": unit}
                    elif isinstance(said, str) and (m := re.fullmatch(r"[-+0-9.eE]+( .*)?", said)):
                        holder[name] = {"value": value, "unit": f"{m[1] or ''}{scale}".strip()}
                    elif isinstance(said, int | float) and not isinstance(said, bool) and not scale:
                        holder[name] = value
                    else:
                        break
                    yield example.operation, dumps(document)
                    if isinstance(holder[name], dict) and value > 0:
                        holder[name]["u"] = 0
                        yield example.operation, dumps(document)


def run_sweep(*, slow: float = 2.0, most_alike: int = 3) -> list[Finding]:
    """Post every request of :func:`sweep` and return what broke a promise."""
    caller, found, alike = Caller(), [], {}
    for case, (route, body) in enumerate(sweep()):
        tell: dict[str, Any] = {}
        for kind, detail in judge(caller, route, body, slow=slow, tell=tell):
            label = f"{route} {kind}"
            alike[label] = alike.get(label, 0) + 1
            if alike[label] <= most_alike:
                text = tell.get("answer", b"")[:2000].decode(errors="replace")
                found.append(
                    Finding(kind, route, body, tell["status"], detail, case, tell["seconds"], text)
                )
    return found


# --------------------------------------------------------------------------- running


def seeds() -> list[tuple[str, Json]]:
    """Packaged examples, and the requests that the tests bring every problem about with."""
    found = [(e.operation, e.request) for e in EXAMPLES]
    try:
        from tests.contract.test_every_problem import CASES
    except ImportError:
        return found
    return found + [(route, request) for route, request, _ in CASES.values()]


def one_case(maker: Maker, corpus: list[tuple[str, Json]]) -> tuple[str, bytes, float | None]:
    """Return route, body and, where it is known, the true conversion."""
    rnd = maker.rnd
    truth = None
    pick = rnd.random()
    if pick < 0.3:
        route, document = rnd.choice(corpus)
        document = copy.deepcopy(document)
        rounds = rnd.choice([1, 1, 1, 2, 3, 5])
    elif pick < 0.4:
        route = rnd.choice(ROUTES)
        document = maker.from_schema(request_schema(route))
        rounds = rnd.choice([0, 0, 1])
    else:
        route = rnd.choice([CONVERSION, CONVERSION, TABLE, VOLUME, EQUILIBRIUM, RATING])
        if route == RATING:
            wild = 0.15 if maker.wild else 0.03
            route, document = ReactorMaker(rnd, wild).question()
            rounds = rnd.choice([0, 0, 0, 0, 1, 2])
            return _mutated(maker, route, document, None, rounds)
        make: Callable[[], tuple[Json, float | None]] = {
            CONVERSION: maker.conversion,
            TABLE: maker.table,
            VOLUME: maker.volume,
            EQUILIBRIUM: maker.equilibrium,
        }[route]
        document, truth = make()
        document = copy.deepcopy(document)
        rounds = rnd.choice([0, 0, 0, 1, 1, 2, 3])
    return _mutated(maker, route, document, truth, rounds)


def _mutated(
    maker: Maker, route: str, document: Json, truth: float | None, rounds: int
) -> tuple[str, bytes, float | None]:
    for _ in range(rounds):
        # The document may no longer be what the mutation takes it for.
        with contextlib.suppress(AttributeError, TypeError, KeyError, IndexError):
            document = maker.mutate(route, document)
    if rounds:
        truth = None
    body = dumps(document)
    if maker.rnd.random() < 0.02:
        body, truth = broken_text(maker.rnd, body), None
    return route, body, truth


def run(
    cases: int = 2000,
    seed: int = 1,
    *,
    slow: float = 2.0,
    order: float = 0.15,
    again: float = 0.05,
    limit: float = 10.0,
    progress: Callable[[int, dict[str, int]], None] | None = None,
    most_alike: int = 3,
) -> list[Finding]:
    """Post ``cases`` requests and return what broke a promise.

    Parameters
    ----------
    cases, seed : int
    slow : float
        Seconds that an answer may take.
    order, again : float
        Shares of cases that are sent with members in another order, and twice.
    limit : float
        Seconds after which an answer is no longer waited for (by SIGALRM, so in
        the main thread only).
    progress : callable, optional
        Told the number of cases done and the counts by status, every 500.
    most_alike : int
        Findings of one kind that are kept.
    """
    caller, corpus = Caller(limit), seeds()
    found: list[Finding] = []
    alike: dict[str, int] = {}
    counts: dict[str, int] = {}

    def keep(
        kind: str, route: str, body: bytes, detail: str, case: int, tell: dict[str, Any]
    ) -> None:
        if wild and kind.startswith(("order", "untrue")):
            kind = f"wild {kind}"
        label = f"{route} {kind}"
        alike[label] = alike.get(label, 0) + 1
        if alike[label] <= most_alike:
            text = tell.get("answer", b"")[:2000].decode(errors="replace")
            found.append(
                Finding(
                    kind,
                    route,
                    body,
                    tell.get("status", 0),
                    detail,
                    case,
                    tell.get("seconds", 0.0),
                    text,
                )
            )

    for case in range(cases):
        rnd = random.Random(f"{seed}/{case}")  # each case stands alone, to be run again by itself
        wild = case % 2 == 1
        route, body, truth = one_case(Maker(rnd, wild=wild), corpus)
        tell: dict[str, Any] = {}
        for kind, detail in judge(caller, route, body, slow=slow, tell=tell):
            keep(kind, route, body, detail, case, tell)
        status = tell["status"]
        counts[f"{route} {status}"] = counts.get(f"{route} {status}", 0) + 1
        if progress is not None and case % 500 == 499:
            progress(case + 1, {**counts, **{f"! {k}": v for k, v in alike.items()}})
        if status == 0:
            continue
        if rnd.random() < again:
            status2, raw2, _, _ = caller.post(route, body)
            if (status2, raw2) != (status, tell["answer"]):
                keep("not-deterministic", route, body, f"{status} {status2}", case, tell)
        if status == 200 and route in (TABLE, EQUILIBRIUM) and rnd.random() < 0.1:
            status2, raw2, media, _ = caller.post(route, body, Accept="text/csv")
            if status2 != 200 or media != "text/csv":
                keep(f"csv {status2}", route, body, caller.failure(), case, tell)
            elif re.search(rb"(?:^|,)-?(?:nan|inf)(?:,|\r)", raw2):
                keep("csv nan", route, body, "", case, tell)
        if status in (200, 422) and rnd.random() < order:
            other = dumps(shuffled(rnd, json.loads(body))) if _readable(body) else None
            if other is not None:
                status2, raw2, _, _ = caller.post(route, other)
                if status2 != status:
                    keep(
                        "order-status",
                        route,
                        body,
                        f"{status} {status2}: {raw2[:300]!r} by {other[:1500]!r}",
                        case,
                        tell,
                    )
                else:
                    where = differ(json.loads(tell["answer"]), json.loads(raw2), 1e-6)
                    if where and status == 200:
                        keep(
                            f"order {_order_kind(where)}",
                            route,
                            body,
                            f"{where} by {other[:1500]!r}",
                            case,
                            tell,
                        )
        if truth is not None and status == 200 and route == CONVERSION:
            said = json.loads(tell["answer"])["result"]["conversion"]
            if said is not None and not math.isclose(
                said["value"], truth, rel_tol=1e-5, abs_tol=max(1e-5, 0.05 * (said["u"] or 0))
            ):
                keep(
                    "untrue",
                    route,
                    body,
                    f"conversion {said['value']!r} u {said['u']!r}, true {truth!r}",
                    case,
                    tell,
                )
    return found


def _readable(body: bytes) -> bool:
    try:
        return _no_duplicates(body)
    except (ValueError, RecursionError):
        return False


def _order_kind(where: str) -> str:
    return _generic(where.split(":")[0].strip("/"))


# --------------------------------------------------------------------------- making it small


def smaller(route: str, body: bytes, kind: str, *, most: int = 1500, limit: float = 10.0) -> bytes:
    """Return the smallest body found that still breaks the same promise."""
    caller = Caller(limit)
    document = json.loads(body)
    tries = 0

    def still(candidate: Json) -> bool:
        nonlocal tries
        tries += 1
        return any(k == kind for k, _ in judge(caller, route, dumps(candidate)))

    if not still(document):
        return body
    maker = Maker(random.Random(0))
    changed = True
    while changed and tries < most:
        changed = False
        for holder, name in sorted(
            maker.places(document), key=lambda p: -len(json.dumps(p[0][p[1]]))
        ):
            try:
                value = holder[name]
            except (KeyError, IndexError):
                continue
            if isinstance(holder, dict):
                items = list(holder.items())
                del holder[name]
                if still(document):
                    changed = True
                    continue
                holder.clear()
                holder.update(items)
            else:
                kept = list(holder)
                del holder[name]
                if still(document):
                    changed = True
                    break
                holder[:] = kept
            simple: list[Any] = []
            if isinstance(value, dict) and "value" in value:
                simple = [f"{value['value']!r} {value.get('unit', '')}".strip()]
            elif isinstance(value, int | float) and not isinstance(value, bool):
                simple = [1, float(f"{value:.2g}")]
            elif isinstance(value, str) and (m := re.match(r"[-+0-9.eE]+", value)):
                with contextlib.suppress(ValueError):
                    simple = [f"1{value[m.end() :]}", f"{float(m[0]):.2g}{value[m.end() :]}"]
            for new in simple:
                if len(json.dumps(new)) >= len(json.dumps(value)) or tries >= most:
                    continue
                holder[name] = new
                if still(document):
                    changed = True
                    break
                holder[name] = value
            if tries >= most:
                break
    return dumps(document)


if __name__ == "__main__":
    import argparse
    import resource
    import sys

    parser = argparse.ArgumentParser()
    parser.add_argument("--cases", type=int, default=2000)
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--out", default="findings.json")
    parser.add_argument("--sweep", action="store_true")
    options = parser.parse_args()
    resource.setrlimit(resource.RLIMIT_AS, (4 << 30, 4 << 30))

    def told(done: int, counts: dict[str, int]) -> None:
        sys.stderr.write(f"{done} {json.dumps(counts, sort_keys=True)}\n")

    listed = run_sweep() if options.sweep else run(options.cases, options.seed, progress=told)
    with open(options.out, "w") as out:
        json.dump(
            [{**vars(f), "body": f.body.decode("utf-8", "replace")} for f in listed],
            out,
            indent=1,
            ensure_ascii=False,
        )
    sys.stderr.write(f"{len(listed)} findings\n")
