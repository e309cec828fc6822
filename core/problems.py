"""The catalogue of everything that can stand against an answer.

One entry a code: a title, and a text that says what it means and how to mend
it. Faults of the core, of the schemas and of the service all take their codes
from here; the service adds the HTTP status and a page for each.
"""

from __future__ import annotations

from typing import NamedTuple


class Entry(NamedTuple):
    """Title and explanation of one code."""

    title: str
    text: str


_READING_A_REQUEST: dict[str, Entry] = {
    "not-json": Entry(
        "Not JSON",
        "The body is not a JSON document (RFC 8259). The detail says where reading stopped; NaN,"
        " Infinity and numbers beyond the range of a double are no JSON either.",
    ),
    "too-deep": Entry(
        "Nested too deep",
        "The document nests deeper than any request of this service needs. Send the document that"
        " the contract describes.",
    ),
    "duplicate-name": Entry(
        "Name stated twice",
        "One object of the document has the same member twice, so that it is not clear which is"
        " meant. Remove one of them.",
    ),
    "document-breaks-schema": Entry(
        "The document breaks the contract",
        "Several faults of shape were found; each is listed under 'errors' with its place. The"
        " contract is served at /v1/openapi.json.",
    ),
    "unknown-field": Entry(
        "Unknown field",
        "An object has a member that the contract does not know. Correct its name, or leave it"
        " out: nothing is ignored silently.",
    ),
    "missing-field": Entry(
        "Missing field",
        "An object lacks a member that the contract requires. Add it.",
    ),
    "wrong-type": Entry(
        "Wrong type",
        "A value has another JSON type than the contract says. Numbers are not written as"
        " strings, and null is not a value unless the contract says so.",
    ),
    "wrong-length": Entry(
        "Wrong number of entries",
        "An array or object has fewer or more entries than allowed. Split the request, or complete"
        " it.",
    ),
    "not-a-choice": Entry(
        "Not one of the choices",
        "A string is none of those allowed here. Choose one of the list in the detail.",
    ),
    "bad-text": Entry(
        "Text not allowed here",
        "A string does not have the form needed here. The detail says which form.",
    ),
    "not-a-quantity": Entry(
        "Not a quantity",
        "A string does not start with a number that a unit follows. Write it as '12.5 kmol/h', or"
        " as an object with 'value' and 'unit'.",
    ),
    "out-of-range": Entry(
        "Number out of range",
        "A number lies outside the range that the contract allows. The detail says the range.",
    ),
    "unknown-parameter": Entry(
        "Unknown query parameter",
        "The query has a parameter, or a value of one, that this route does not know. The detail"
        " says what is allowed.",
    ),
}

_HTTP: dict[str, Entry] = {
    "no-such-route": Entry(
        "No such route",
        "Nothing is served under this path. GET / lists the routes.",
    ),
    "method-not-allowed": Entry(
        "Method not allowed",
        "The route exists and does not take this method. The Allow header says which it takes.",
    ),
    "not-acceptable": Entry(
        "No form that the client accepts",
        "The Accept header names no media type in which this route answers. The detail says which"
        " it offers.",
    ),
    "unsupported-media-type": Entry(
        "Body not declared as JSON",
        "Calculations take JSON in UTF-8, uncompressed. Send the header 'Content-Type:"
        " application/json', and no Content-Encoding.",
    ),
    "body-too-large": Entry(
        "Body too large",
        "The body is larger than this service reads. Split the request, or start the service with"
        " a larger --max-body.",
    ),
    "malformed-http": Entry(
        "Malformed HTTP",
        "The request does not obey HTTP/1.1 and was not read. Use an HTTP client library.",
    ),
    "request-line-too-long": Entry(
        "Request line too long",
        "The path and query are longer than this service reads. What is to be computed goes into"
        " the body.",
    ),
    "header-too-large": Entry(
        "Header too large",
        "The request's headers are more, or longer, than this service reads. Send fewer or shorter"
        " ones.",
    ),
    "unsupported-transfer-coding": Entry(
        "Transfer coding not supported",
        "The body came in a transfer coding that this service does not read. Send it with"
        " Content-Length or chunked.",
    ),
    "expectation-failed": Entry(
        "Expectation failed",
        "The Expect header asks for something that this service does not do. Leave it out.",
    ),
    "internal-error": Entry(
        "Fault of the service",
        "The service failed in a way that it should not. Report the request and the X-Request-ID"
        " of the answer.",
    ),
}

_QUANTITIES: dict[str, Entry] = {
    "cannot-be-computed": Entry(
        "The request cannot be computed",
        "The document obeys the contract and several things in it stand against computing an"
        " answer; each is listed under 'errors' with its place.",
    ),
    "unknown-unit": Entry(
        "Unknown unit",
        "The text is not a unit that is known here, or could be read in more than one way. Use"
        " one of the spellings that the detail names; the case of letters matters, and several"
        " factors after a slash need brackets.",
    ),
    "wrong-dimension": Entry(
        "Wrong kind of quantity",
        "The unit belongs to another kind of quantity than the field takes. The detail says which"
        " kinds are allowed.",
    ),
    "unit-not-allowed": Entry(
        "Unit not allowed here",
        "A gauge unit, or one with a zero of its own, stands where an absolute unit or a"
        " difference is meant. Use the unit that the detail names.",
    ),
    "unit-contradicts-basis": Entry(
        "Unit contradicts the basis",
        "The unit says mole, mass or volume, and the analysis states another basis. Correct one of"
        " the two.",
    ),
    "impossible-value": Entry(
        "Impossible value",
        "No substance, stream or instrument has such a value: a flow below zero, an absolute"
        " temperature or pressure not above zero, a fraction above one. Correct the reading.",
    ),
    "relative-uncertainty-of-offset-unit": Entry(
        "Relative uncertainty of an offset unit",
        "A share of a temperature in degC or of a gauge pressure depends on where the unit has its"
        " zero. State 'u' as a difference instead.",
    ),
    "uncertainty-out-of-range": Entry(
        "Uncertainty out of range",
        "A standard uncertainty must be finite and not below zero. Correct it.",
    ),
    "conflicting-fields": Entry(
        "Fields that exclude each other",
        "Two fields say the same thing, or contradict each other. Leave one of them out.",
    ),
    "field-needed": Entry(
        "Field needed here",
        "With what else the request says, a field is needed that was not sent. Add it.",
    ),
    "field-not-used": Entry(
        "Field without meaning here",
        "With what else the request says, the field would have no effect. Leave it out.",
    ),
}

_SUBSTANCES_AND_REACTIONS: dict[str, Entry] = {
    "formula-not-understood": Entry(
        "Formula not understood",
        "The text cannot be read as a chemical formula, or can be read in two ways. Mend it at the"
        " position named, using one of the spellings offered.",
    ),
    "unknown-element": Entry(
        "Unknown element",
        "A formula holds a symbol that no element has. Write symbols as in the periodic table, a"
        " capital and at most one small letter.",
    ),
    "no-standard-atomic-weight": Entry(
        "No standard atomic weight",
        "All nuclides of this element are radioactive and their mixture differs from source to"
        " source, so there is no standard value. State the molar mass of the substance.",
    ),
    "unknown-substance": Entry(
        "Unknown substance",
        "The name is not declared and cannot be read as a formula, or is none of the request's"
        " substances. Declare it under 'species' with a formula or a molar mass.",
    ),
    "name-not-usable": Entry(
        "Name not usable",
        "A name has 1 to 80 printable characters and no white space at its ends. Choose another"
        " name.",
    ),
    "name-clash": Entry(
        "Two spellings of one name",
        "Two spellings that differ only by a state of aggregation name one substance. Use one of"
        " them, or declare both under 'species'.",
    ),
    "phase-contradicts": Entry(
        "Phases contradict each other",
        "One substance is stated to be in two phases. State one, or declare two substances with"
        " names and phases of their own and the same formula.",
    ),
    "molar-mass-not-positive": Entry(
        "Molar mass not positive",
        "A molar mass must be finite and above zero. Correct the value or its unit.",
    ),
    "molar-mass-contradicts-formula": Entry(
        "Molar mass contradicts the formula",
        "The stated molar mass differs from that of the formula by more than 1 %. Correct one of"
        " them, or state the molar mass alone.",
    ),
    "equation-not-understood": Entry(
        "Equation not understood",
        "The equation cannot be read at the position named. Write coefficients and names with"
        " ' + ' between substances and one arrow (->, →, <=>, ⇌, =).",
    ),
    "unbalanced-reaction": Entry(
        "Unbalanced reaction",
        "The sides count different numbers of atoms or charges. Correct the coefficients; where"
        " only one balanced form exists it is given.",
    ),
    "mass-not-conserved": Entry(
        "Mass not conserved",
        "The molar masses of the two sides differ by more than 0.5 %. Correct a coefficient or a"
        " molar mass, or add what is missing.",
    ),
    "reaction-without-change": Entry(
        "Reaction without change",
        "Both sides hold the same substances in the same amounts. Correct the equation or leave it"
        " out.",
    ),
    "duplicate-reaction-id": Entry(
        "Reaction id used twice",
        "Two reactions have the same id. Give each its own.",
    ),
    "unknown-reaction": Entry(
        "Unknown reaction",
        "No reaction of the request has this id. Ids default to r1, r2, ... by place.",
    ),
    "unknown-reading": Entry(
        "Unknown reading",
        "What is named is no reading of the request, or one that the account does not use. A"
        " reading is named by its JSON Pointer in the request.",
    ),
    "unknown-key": Entry(
        "Unknown key reactant",
        "The key is none of the request's substances. Name a reactant that the feed holds.",
    ),
    "key-absent": Entry(
        "Key reactant not fed",
        "The feed holds none of the key reactant, and the account counts per key fed. Name a"
        " reactant that the feed holds, or state its flow.",
    ),
    "key-not-fed": Entry(
        "No feed stream holds the key",
        "The conversion counts what is fed of the key, and no feed stream can hold any. Choose a"
        " substance of the feed, or state its flow.",
    ),
    "key-not-consumed": Entry(
        "Key not consumed",
        "No reaction as written consumes the key. Name a reactant as the key, or write the"
        " reaction the other way round.",
    ),
}

_STREAMS: dict[str, Entry] = {
    "not-in-account": Entry(
        "Substance not in the account",
        "A stream names a substance that stands in no reaction and that no feed stream holds."
        " Correct its name, or state it in the feed.",
    ),
    "stream-form": Entry(
        "Form of a stream",
        "A stream states exactly one of: flows; amounts (a batch); flow with analysis;"
        " concentrations with volumetric_flow (a batch: volume). State one of them.",
    ),
    "duplicate-id": Entry(
        "Stream id used twice",
        "Two streams have the same id. Give each its own.",
    ),
    "no-flow": Entry(
        "Nothing flows",
        "No substance of the stream's phase has a flow above zero. State what flows.",
    ),
    "flow-negative": Entry(
        "Flow below zero",
        "A flow of the feed is below zero. Correct the reading.",
    ),
    "meter-conditions-missing": Entry(
        "Conditions at the gas meter missing",
        "A volume of gas says how much it is only with the meter's own temperature and pressure,"
        " which are never borrowed from the reactor. State 'meter', or the flow in Nm3/h, Sm3/h"
        " or a molar unit.",
    ),
    "meter-design-of-liquid": Entry(
        "Design density of a meter on a liquid",
        "A differential-pressure meter is corrected for the density of a gas, which follows from"
        " its composition, temperature and pressure; that of a liquid does not. State the flow"
        " corrected.",
    ),
    "flow-basis-ambiguous": Entry(
        "As analysed, by which analysis?",
        "A flow counted as analysed stands beside several analyses from which not the same was"
        " removed. State the flow of the whole stream, or give analyses and flow the same"
        " removals.",
    ),
    "volume-contradicts-conditions": Entry(
        "Volume contradicts temperature and pressure",
        "Flows, volume, temperature and pressure of a gas are related by the gas law, and those"
        " stated are not. Leave one out, or correct the one that is wrong.",
    ),
    "condition-missing": Entry(
        "Condition missing",
        "The answer depends on a temperature, pressure or volume that was not stated. State it.",
    ),
    "unused-lump": Entry(
        "Lump without a value",
        "A lump is declared and no value has its name. Correct the name, or leave the lump out.",
    ),
    "removed-substance-read": Entry(
        "Removed substance has a value",
        "A substance that is removed from the sample cannot be read in it. Leave out the removal"
        " or the value.",
    ),
    "removal-residual": Entry(
        "Residuals leave no sample",
        "What the removals leave in the sample adds up to the whole of it or more. Correct the"
        " residuals, or the conditions of saturation.",
    ),
    "vapour-pressure-missing": Entry(
        "Vapour pressure not known",
        "The packaged table has no such substance, no proven correlation for it, or its saturated"
        " vapour is associated. State 'vapour_pressure' next to temperature and pressure.",
    ),
    "ambiguous-substance": Entry(
        "Several substances have this composition",
        "The composition fits several substances of the table, which are listed with their"
        " registry numbers. Declare under 'species' which is meant ('registry_number' or 'name'),"
        " call the substance by one of these names, or state the value.",
    ),
    "substance-named-twice": Entry(
        "One substance under two names",
        "Two names stand for what the packaged tables know as one substance, which would count"
        " twice. Write it one way, or say which other substance is meant.",
    ),
    "identity-contradicts-formula": Entry(
        "Registry number or name of another substance",
        "A substance is declared with the registry number or name of one that has another formula."
        " Correct one of them.",
    ),
    "property-data-missing": Entry(
        "Property data missing",
        "The packaged tables lack a property that is needed. The detail names the fields under"
        " 'species' that would settle it.",
    ),
    "outside-correlation": Entry(
        "Outside the range of a correlation",
        "The temperature lies outside the range in which the correlation holds. Correct it, or"
        " state the value that is needed.",
    ),
    "liquid-volume-basis": Entry(
        "Volume fractions of a liquid",
        "Volume fractions of a liquid depend on densities of mixtures that are not known here."
        " Give the analysis on mass or mole basis, or as concentrations.",
    ),
    "liquid-volume-of-substance": Entry(
        "Volume of a substance in a liquid",
        "The volume that one substance takes in a liquid is not known here. Give its flow by mass"
        " or amount.",
    ),
    "liquid-concentration-removal": Entry(
        "Concentrations after a removal",
        "Taking a substance out of a liquid changes its volume in a way that is not known here."
        " Give the analysis as fractions.",
    ),
}

_MOLE_ACCOUNT: dict[str, Entry] = {
    "conversions-or-extents": Entry(
        "Conversions or extents",
        "A table is asked for at conversions of the key or at extents of the reactions. State"
        " exactly one of the two.",
    ),
    "conversion-not-enough": Entry(
        "A conversion does not fix the extents",
        "With several independent reactions one conversion can be reached in many ways. State the"
        " extents.",
    ),
    "conversion-out-of-reach": Entry(
        "Conversion out of reach",
        "At such a conversion some substance would have a flow below zero. Stay within the limits"
        " that the detail gives.",
    ),
    "extents-out-of-reach": Entry(
        "Extents out of reach",
        "These extents would leave a flow below zero, or run a one-way reaction backwards. State"
        " others.",
    ),
    "extents-unbounded": Entry(
        "Extents without bound",
        "The reactions can run without limit and change nothing, so that limits of the conversion"
        " cannot be found. State each conversion of matter once.",
    ),
    "pressure-follows": Entry(
        "Pressure follows from the volume",
        "A batch that holds its volume takes the pressure that follows. Leave the outlet pressure"
        " out, or hold the pressure.",
    ),
    "phase-vanishes": Entry(
        "Nothing is left in the phase",
        "At such a conversion no substance is left in the stream's phase. State a smaller"
        " conversion, or correct the phases of the substances.",
    ),
}

_OUTLET_ANALYSIS: dict[str, Entry] = {
    "compute-budget": Entry(
        "Compute budget used up",
        "The question takes more work than one request may: an account with very many unknowns or"
        " readings, an equilibrium of many reactions at many points, or a reactor along which rates"
        " are needed too often. Leave out what does not matter, take streams together, ask for"
        " fewer points, or split it.",
    ),
    "under-determined": Entry(
        "Readings do not settle the account",
        "More is unknown than the readings say. The detail names what stays open and which further"
        " reading would settle it.",
    ),
    "exact-readings-conflict": Entry(
        "Exact readings contradict each other",
        "Readings stated as exact (u = 0) cannot all be true. Give at least one of them an"
        " uncertainty, or correct it.",
    ),
    "correlation-not-usable": Entry(
        "Correlation not usable",
        "A correlation is one of two different readings, stated once, each with an error of its"
        " own: not of a limit, nor of what is exact. Correct it, or leave it out.",
    ),
    "correlations-impossible": Entry(
        "Correlations impossible together",
        "No errors can have these coefficients together: some combination of the readings would"
        " have a variance below zero. Pairs that are not stated count as 0; state them all.",
    ),
    "fully-correlated-readings": Entry(
        "Readings correlated fully",
        "Errors are correlated so fully that a combination of the readings, such as their sum, has"
        " none, and the account has another value of it. Give the readings a part of their own,"
        " correct a value, or leave one out.",
    ),
    "too-few-draws": Entry(
        "Too few draws for the coverage",
        "Hardly any draw lies beyond the ends of a coverage interval this wide. Draw more, or ask"
        " for less coverage.",
    ),
    "draws-without-account": Entry(
        "Too many draws without an account",
        "Readings drawn within their uncertainties leave too often no account with every total"
        " positive, or no gas by its model. State smaller uncertainties, or ask for linear"
        " propagation.",
    ),
    "not-converged": Entry(
        "Estimation did not converge",
        "No account was found that fits the readings, which usually means that some of them cannot"
        " be true together. Look for a wrong unit, basis or removal.",
    ),
    "element-not-named": Entry(
        "Element not named",
        "Yields on element basis count carbon unless another element is named, and the key holds no"
        " carbon. State 'element'.",
    ),
    "element-not-in-key": Entry(
        "Element not in the key",
        "Yields on element basis count an element of the key, and the key does not hold the one"
        " named. Name one that it holds.",
    ),
    "nowhere-to-leave": Entry(
        "Nowhere to leave",
        "No outlet stream can hold a substance that the account has. Name it in a stream's"
        " analysis, or add the stream in which it leaves.",
    ),
    "analysis-sum": Entry(
        "Analysis does not add up",
        "The fractions of an analysis are far from 100 %, and nothing makes up the rest. Name a"
        " balance or the missing substances, or correct the values.",
    ),
    "limit-out-of-range": Entry(
        "Limit out of range",
        "A detection limit or the end of an instrument's range must be above zero, and of a"
        " fraction below one. Correct it.",
    ),
}

_REACTORS: dict[str, Entry] = {
    "one-reaction-only": Entry(
        "One reaction only",
        "What follows the path of one reaction is computed for one. Send the one that decides it.",
    ),
    "size-not-stated": Entry(
        "Size not stated",
        "What comes out of a reactor, and where it must be run, hang on how big it is. State its"
        " 'volume' or 'catalyst_mass', of a batch the 'time'; ask /v1/volume for the size that a"
        " target needs.",
    ),
    "size-basis-needed": Entry(
        "Basis of the size needed",
        "The rate counts by one thing (fluid, bed, catalyst) and the reactor by another, and what"
        " is in between is not stated: the bulk density of the catalyst, or the void fraction of"
        " the bed. State it, or the size on the rate's own basis.",
    ),
    "pressure-exhausted": Entry(
        "Pressure exhausted",
        "The pressure drop uses up the inlet pressure before the end of the bed. Raise the pressure"
        ", lower the flow, or state a wider bed or larger particles.",
    ),
    "rate-does-not-fade": Entry(
        "A rate that does not fade",
        "A reactant is used up inside the reactor, and the rate of a reaction that consumes it does"
        " not hang on it: beyond there the rate law says nothing. Give the rate an order above zero"
        " in it.",
    ),
    "no-solution": Entry(
        "No solution",
        "No temperature at which a utility that flows against the stream could leave makes it enter"
        " at its own, or none that can be resolved. Check its flow, temperature and coefficient.",
    ),
    "recycle-not-found": Entry(
        "Recycle not found",
        "No outlet was found that, with its part returned to the inlet, makes itself again. State a"
        " smaller recycle ratio or size, or a stirred tank.",
    ),
    "heat-capacity-of-liquid-unknown": Entry(
        "Heat capacity of the liquid unknown",
        "The liquid is stated by concentrations, beside which a solvent may be in it that is heated"
        " too. State the flows of everything in it, or its density.",
    ),
    "train-sizes": Entry(
        "Sizes of a train",
        "Where a size is asked for, exactly one reactor of a train is without one; else every one"
        " has its own.",
    ),
    "cannot-be-free": Entry(
        "Nothing to be changed",
        "What is said to be free is not there in this reactor: a batch has no feed rate, a liquid"
        " no pressure that counts, and only a reactor that exchanges heat has a utility.",
    ),
    "feed-does-not-fit-reactor": Entry(
        "Feed does not fit the reactor",
        "A batch is charged with amounts, every other reactor is fed by flows. State the feed the"
        " way that the reactor needs.",
    ),
    "rate-of-needed": Entry(
        "Whose rate is it?",
        "The substances of the reaction react at different rates, and a silent factor of two is"
        " the classic mistake. Say in 'of' whose rate the law gives.",
    ),
    "rate-of-absent-substance": Entry(
        "Rate of a substance that does not react",
        "The law is said to give the rate of a substance that the reaction neither consumes nor"
        " forms. Name one that it does.",
    ),
    "heat-of-absent-substance": Entry(
        "Heat per mole of a substance that does not react",
        "The heat of a reaction is stated per mole of a substance that the reaction neither"
        " consumes nor forms. Name one that it does.",
    ),
    "rate-constant-unit": Entry(
        "Unit of the rate constant",
        "The unit does not fit the orders and the driving quantity of the law. The detail says"
        " the unit expected; check orders and unit.",
    ),
    "adsorption-constant-unit": Entry(
        "Unit of a constant of adsorption",
        "A term of a denominator is a number, so that the unit of its constant follows from its"
        " orders and the driving quantity. The detail says the unit expected.",
    ),
    "effectiveness-needs-first-order": Entry(
        "Effectiveness by a Thiele modulus needs a first order",
        "A pellet's effectiveness follows from its modulus, independent of concentration, where the"
        " rate is of first order in one reactant, irreversible or reversible. State it as a number"
        " for any other rate.",
    ),
    "rate-vanishes": Entry(
        "The rate vanishes on the way",
        "Before the target the rate is nothing beside that at the feed, mostly because an"
        " endothermic reaction cools itself. Ask for less, or feed it hotter.",
    ),
    "rate-not-finite": Entry(
        "Rate without a finite value",
        "Somewhere on the way the rate law has no finite value. Check orders, constants and their"
        " units.",
    ),
    "rate-constant-out-of-range": Entry(
        "Rate constant beyond use",
        "At this temperature the constant vanishes or overflows. Check its parameters, their units"
        " and the temperature.",
    ),
    "equilibrium-constant-unit": Entry(
        "Unit of the equilibrium constant",
        "The unit does not fit the reaction as it is written. The detail says the units expected.",
    ),
    "equilibrium-constant-not-used": Entry(
        "Equilibrium constant would not be heeded",
        "An equilibrium constant is stated beside an irreversible rate, which knows no limit. Make"
        " the rate reversible, or leave the constant out.",
    ),
    "equilibrium-constant-does-not-fit": Entry(
        "Equilibrium constant does not fit",
        "A constant of this kind says nothing about this reaction in this phase. Give it in the"
        " kind that the detail names.",
    ),
    "driving-needs-gas": Entry(
        "Partial pressures need a gas",
        "The rate is driven by partial pressures and the feed is a liquid. Give the law in"
        " concentrations or mole fractions.",
    ),
    "mole-fractions-not-known": Entry(
        "Mole fractions not known",
        "A liquid given by concentrations may hold a solvent that they do not name. State its"
        " density too, or the flows of everything in it, where mole fractions matter.",
    ),
    "order-outside-phase": Entry(
        "Order of a substance outside the phase",
        "The law counts a substance that is not in the phase where the reaction runs. Leave its"
        " order out, or put its amount into the constant.",
    ),
    "floor-without-negative-order": Entry(
        "Floor without a negative order",
        "A floor holds a rate that would grow without limit, which only a negative order does."
        " Leave the floor out, or check the order.",
    ),
    "negative-order-needs-floor": Entry(
        "Negative order needs a floor",
        "Where a substance of negative order is absent the law has no value. State 'floor' for it.",
    ),
    "reaction-does-not-start": Entry(
        "Reaction does not start",
        "The rate at the feed is zero, since the law has a positive order in a substance that the"
        " feed lacks. Feed some of it, or choose a stirred tank.",
    ),
    "target-form": Entry(
        "Form of the target",
        "A target is a conversion, an approach to equilibrium, or exactly one of flow,"
        " mole_fraction, concentration, yield and maximum of a substance. State one.",
    ),
    "target-does-not-move": Entry(
        "Target does not change with conversion",
        "The quantity stays the same whatever the conversion. Name a substance that the reaction"
        " makes or consumes.",
    ),
    "target-not-defined": Entry(
        "Target not defined here",
        "The quantity does not exist for this substance or cannot be known with this feed. The"
        " detail says what to state instead.",
    ),
    "target-out-of-reach": Entry(
        "Target out of reach",
        "No reactor of this kind reaches the target: equilibrium or a substance that runs out"
        " bounds it, as the detail says. Ask for less, or change the feed or conditions.",
    ),
    "steady-state-not-found": Entry(
        "No steady state was found",
        "A stirred tank with several reactions has no state of rest that a search finds. A rate"
        " that does not vanish with what it consumes can have none: check orders, constants and"
        " their units.",
    ),
    "integral-not-converged": Entry(
        "Integral did not converge",
        "The size is an integral that could not be computed to its tolerance. Check the rate law"
        " for values beyond sense.",
    ),
    "march-not-finished": Entry(
        "Equations not followed to the end",
        "The equations along a reactor could be followed only so far: there a rate or a state is"
        " not finite, or changes without bound. Check rate laws, orders, floors and sizes, or ask"
        " for less.",
    ),
    "not-a-gas": Entry(
        "Not a gas by the equation of state",
        "At this temperature, pressure and composition the gas model has a liquid only, or no one"
        " gas that fills the volume. Correct them, declare the phase of what is condensed, or state"
        " the compressibility.",
    ),
    "gas-not-converged": Entry(
        "No Z was found that agrees with the account",
        "Z by the gas model and the composition that readings have by it do not come to rest. State"
        " the compressibility.",
    ),
    "root-not-bracketed": Entry(
        "Solution not enclosed",
        "An equation has no solution in the range in which one was expected. Check the request for"
        " values beyond sense.",
    ),
    "root-not-converged": Entry(
        "Solution did not converge",
        "An equation could not be solved to its tolerance. Check the request for values beyond"
        " sense.",
    ),
}

_EQUILIBRIUM: dict[str, Entry] = {
    "inconsistent-constants": Entry(
        "Equilibrium constants contradict each other",
        "Reactions that can be made of each other have constants that cannot all be true. Leave"
        " one of the reactions out, or correct a constant.",
    ),
    "mixture-vanishes": Entry(
        "Nothing is left in the gas",
        "At this pressure the pure solids and liquids hold everything at equilibrium, and there is"
        " no gas whose composition would tell its fugacities. Take the gas as ideal, which is"
        " answered, hold the volume, lower the pressure, or add an inert gas.",
    ),
    "equilibrium-not-found": Entry(
        "Equilibrium not found",
        "The search for the composition at equilibrium did not settle, or pure solids and liquids"
        " alone fix the temperature of an adiabatic one, at which any amount of the gas may be"
        " there. Check the constants, and pressure or volume, for values beyond sense; add an inert"
        " gas.",
    ),
    "hold-needs-batch": Entry(
        "Only a batch holds its volume",
        "A flow has no volume to hold. State 'amounts', a batch in a closed vessel, or hold the"
        " pressure.",
    ),
    "sweep-does-not-fit": Entry(
        "Not swept under this hold",
        "A sweep runs over a temperature or a pressure that is held. Where enthalpy or energy is"
        " held the temperature follows from it.",
    ),
    "constant-at-one-temperature": Entry(
        "Constant known at one temperature",
        "The question needs the equilibrium constant at other temperatures than the one for which"
        " its value is stated. State it at a temperature with the enthalpy of the reaction, as a"
        " correlation, or from thermochemistry.",
    ),
    "no-such-temperature": Entry(
        "No such temperature",
        "The temperature that was asked for does not exist where the data hold. The detail says"
        " what was looked for, and where.",
    ),
}

CATALOGUE: dict[str, Entry] = {
    **_READING_A_REQUEST,
    **_HTTP,
    **_QUANTITIES,
    **_SUBSTANCES_AND_REACTIONS,
    **_STREAMS,
    **_MOLE_ACCOUNT,
    **_OUTLET_ANALYSIS,
    **_REACTORS,
    **_EQUILIBRIUM,
}

BREAKS_CONTRACT = frozenset(_READING_A_REQUEST)
"""Codes of a request that could not be read: the caller's programming error."""
