"""The catalogue of what an answer's reader must know: notes and assumptions.

One entry a code, beside :mod:`core.problems`, which has what stands against an
answer.
"""

from __future__ import annotations

from core.problems import Entry

NOTES: dict[str, Entry] = {
    "screening-calculation": Entry(
        "A screening calculation",
        "Ideal reactors, or equilibrium, under stated conditions: no relief, runaway or"
        " flammability assessment. Follow local codes and licensed practice.",
    ),
    "default-uncertainty": Entry(
        "Default uncertainty",
        "A reading came without an uncertainty, and that of common practice was taken. State 'u' or"
        " 'u_rel' where the instrument is known.",
    ),
    "default-uncertainty-large": Entry(
        "Default uncertainty larger than the reading",
        "The default of common practice exceeds the reading itself, as it does for traces. State"
        " 'u'.",
    ),
    "instrument-shares-nothing": Entry(
        "Instrument that shares no error",
        "Several readings name one instrument and do not state 'u_shared', the part of their error"
        " that is common to them. Their errors count as independent within a sample.",
    ),
    "linear-propagation-doubtful": Entry(
        "Linear propagation is in doubt",
        "The account is curved over the uncertainties of its readings, so that terms of second"
        " order shift or widen a result by more than a tenth of u; or its uncertainty rests on"
        " non-detects, which are not distributed normally. Ask for the method 'monte-carlo'.",
    ),
    "draws-left-out": Entry(
        "Draws left out",
        "Some draws of the readings have no account that comes near them with every total positive,"
        " because an uncertainty is large beside its reading. They are left out and counted.",
    ),
    "mean-of-draws-differs": Entry(
        "Mean of the draws off the estimate",
        "The draws' mean conversion is off the estimate by more than a tenth of u. The value given"
        " is the estimate from the readings as they are.",
    ),
    "uncertainty-not-used": Entry(
        "Uncertainties not carried through",
        "This calculation takes its feed as stated. Ask for a conversion where uncertainty counts.",
    ),
    "standard-atmosphere": Entry(
        "Standard atmosphere",
        "Gauge pressures were read with 101.325 kPa. State 'atmospheric_pressure' at altitude.",
    ),
    "pressure-taken-as-absolute": Entry(
        "Pressure taken as absolute",
        "The unit does not say whether the pressure is absolute or gauge, and it was taken as"
        " absolute. Write a gauge reading with a gauge unit.",
    ),
    "pressure-from-volume": Entry(
        "Pressure follows from the volume",
        "Flows, volume and temperature of the gas were stated, and the pressure was computed.",
    ),
    "volumes-add-up": Entry(
        "Volumes of mixed liquids add up",
        "The volume of a mixed liquid was taken as the sum of its streams' volumes.",
    ),
    "constant-density": Entry(
        "Constant density",
        "A liquid's volumetric flow was taken as that of the feed throughout.",
    ),
    "constant-pressure": Entry(
        "Constant pressure",
        "The pressure was taken as that of the feed throughout.",
    ),
    "outlet-as-feed": Entry(
        "Outlet at the feed's conditions",
        "Where 'outlet' does not say otherwise, the feed's temperature and pressure were taken.",
    ),
    "removed-taken-as-absent": Entry(
        "Removed substance taken as absent",
        "A substance was removed before an analysis and nothing tells how much of it there was. The"
        " conversion does not hang on it, and none was taken. State it in a stream of its own.",
    ),
    "outlet-placement": Entry(
        "Where substances leave",
        "Of several outlet streams, those that state flows or an analysis that adds up hold just"
        " what they name; the others may hold anything.",
    ),
    "per-mole-of-key": Entry(
        "Per mole of key",
        "No reading tells how much flows, so every flow is given per mole of key fed.",
    ),
    "vapour-pressure-from-table": Entry(
        "Vapour pressure from a table",
        "The residual of a saturated substance was computed from a packaged correlation over the"
        " pure liquid. State 'vapour_pressure' where a better value is known.",
    ),
    "standard-pressure-one-bar": Entry(
        "Standard pressure 1 bar",
        "A thermodynamic equilibrium constant was read with a standard pressure of 1 bar.",
    ),
    "equilibrium-constant-from-properties": Entry(
        "Equilibrium constant from standard properties",
        "The constant was computed from enthalpies of formation, entropies and heat capacities."
        " 'provenance' has the source of each; state your own under 'species'.",
    ),
    "stated-data-contradict-tables": Entry(
        "Stated data contradict the packaged tables",
        "An enthalpy, entropy or heat capacity that the request states is far from what the"
        " packaged tables have of the substance: by more than 4 kJ/mol and 2 % (an entropy 4"
        " J/(mol K) and 3 %), or 15 % of a heat capacity at every temperature. What is stated was"
        " taken. Check sign, unit and phase, or say which other substance is meant.",
    ),
    "gas-model-extrapolated": Entry(
        "Gas model far beyond its data",
        "The gas is so dense that the cubic equation of state, fitted to vapour pressures, is"
        " little better than a guess: its molecules fill more than half of the volume. Check the"
        " pressure and its unit.",
    ),
    "sources-disagree": Entry(
        "Sources disagree",
        "Well-known collections differ on the properties behind an equilibrium constant or a heat"
        " of reaction. State those that you trust under 'species', or the constant, or the heat.",
    ),
    "property-data-extrapolated": Entry(
        "Property data extrapolated",
        "A heat capacity was used outside the range of its correlation, up to 100 K, as it is at"
        " the end of that range.",
    ),
    "correlation-extrapolated": Entry(
        "Correlation extrapolated",
        "An equilibrium constant was used outside the temperatures between which its correlation"
        " is stated to hold.",
    ),
    "pellet-isothermal": Entry(
        "Pellet of one temperature",
        "The effectiveness of a pellet was found for the temperature of the fluid throughout it,"
        " and the fluid's composition at its surface.",
    ),
    "adsorption-takes-up-heat": Entry(
        "Adsorption that takes up heat",
        "The enthalpy of an adsorption is above zero, which is rare. Check the sign.",
    ),
    "affinity-exponent-one": Entry(
        "Affinity exponent 1",
        "The net rate was taken as forward (1 - Q/K) of the equation as written.",
    ),
    "extents-left-out": Entry(
        "Extents left out",
        "Reactions without an extent were taken not to run.",
    ),
    "concentrations-not-known": Entry(
        "Concentrations not known",
        "The volume of the stream is not known, so its concentrations are null.",
    ),
    "nothing-in-phase": Entry(
        "Nothing in the phase",
        "The readings, or pure solids and liquids at equilibrium, leave nothing in the phase of a"
        " stream. Where it was read, look for an analyser or a meter that reads zero.",
    ),
    "mole-fractions-not-known": Entry(
        "Mole fractions not known",
        "A liquid given by concentrations may hold a solvent that they do not name, so its mole"
        " fractions are null.",
    ),
    "solid-taken-as-gas": Entry(
        "Solid taken as gas",
        "An element that is hardly ever a gas is counted in one. Declare its phase.",
    ),
    "extents-not-unique": Entry(
        "Extents not unique",
        "Dependent reactions leave extents open; the flows of the substances are not.",
    ),
    "dependent-reactions": Entry(
        "Dependent reactions",
        "Some reactions can be made of others, so extents are not unique. Leave out the reactions"
        " named if extents are needed.",
    ),
    "mass-imbalance": Entry(
        "Mass left open",
        "The stated molar masses leave 0.01 % to 0.5 % of mass open. Refine them.",
    ),
    "same-formula": Entry(
        "Same atoms, two names",
        "A name that stands in no reaction has the same atoms as one that does, and is kept apart"
        " as an inert. Write both the same way if they are one substance.",
    ),
    "read-as-element": Entry(
        "Label read as an element",
        "A lone letter that stands in no reaction is read as an element. Declare it with a molar"
        " mass if it is a label.",
    ),
    "rate-taken-as-irreversible": Entry(
        "Rate taken as irreversible",
        "The equation is written both ways and the rate is not. State 'reversible' if equilibrium"
        " matters.",
    ),
    "several-volumes": Entry(
        "Several volumes meet the target",
        "The rate rises somewhere with conversion, and more than one volume meets the target; the"
        " smallest is given.",
    ),
    "unstable-steady-state": Entry(
        "Unstable steady state",
        "The tank leaves the state it is sized for by itself; it would need control to stay there.",
    ),
    "several-steady-states": Entry(
        "More than one steady state",
        "A stirred tank can rest in any of its stable states, and a disturbance or another way of"
        " starting can take it from one to another. Runaway is not assessed; follow local codes and"
        " licensed practice.",
    ),
    "exchanger-works-backwards": Entry(
        "A cooler that heats, or a heater that cools",
        "What comes to a stage of a train is already beyond the temperature that the stage is to"
        " bring it to, so that its duty has the other sign. Check that temperature, and whether"
        " the stage before leaves the stream as hot as computed.",
    ),
    "reactant-exhausted": Entry(
        "Reactant used up",
        "The rate does not fade with a reactant, which is used up inside the reactor; beyond there"
        " nothing reacts.",
    ),
    "enthalpy-of-ideal-gas": Entry(
        "Enthalpies of the ideal gas",
        "The gas model gives volumes and fugacities; what a real gas's enthalpy differs by is left"
        " out of the energy balance.",
    ),
    "search-not-proven": Entry(
        "Search that proves nothing",
        "The steady states are those that a search found; there may be others.",
    ),
    "temperature-limit-exceeded": Entry(
        "Temperature limit exceeded",
        "Somewhere the reactor is hotter than the limit stated in 'temperature_limit'. Runaway,"
        " decomposition and relief are not assessed; follow local codes and licensed practice.",
    ),
    "accumulated-reactant": Entry(
        "Reactant accumulates in a fed batch",
        "What is fed and has not reacted yet would heat the batch if cooling stopped, even with the"
        " feed shut. A screening value: decomposition, gas and relief are not assessed; follow"
        " local codes and licensed practice.",
    ),
    "steady-state-beyond-data": Entry(
        "A steady state beyond the data",
        "The balances show a further steady state at a temperature for which heat capacities are"
        " not known. State 'heat_capacity' under 'species' that reaches further.",
    ),
    "product-needed-to-start": Entry(
        "Product needed to start",
        "The feed alone does not react. The tank must be started with product in it.",
    ),
    "idle-tanks": Entry(
        "Idle tanks",
        "The first tanks of the series stand unreacted.",
    ),
    "taken-as-reversible": Entry(
        "Taken as reversible",
        "Equilibrium is that of reactions running both ways, whatever their arrows say.",
    ),
    "stopped-short-of-equilibrium": Entry(
        "Stopped short of equilibrium",
        "A pure solid or liquid is used up before the reaction comes to equilibrium, or does not"
        " form.",
    ),
    "points-without-answer": Entry(
        "Points without an answer",
        "The sweep reaches where there is no answer; its rows are empty there.",
    ),
    "heat-not-known": Entry(
        "Heat not known",
        "Enthalpies or heat capacities of some substances are not known, so that no heat is given.",
    ),
    "heat-of-mixing-left-out": Entry(
        "Heat of mixing left out",
        "Heats in a liquid were computed from pure substances. State the reaction's 'enthalpy'"
        " where heats of solution, mixing or dilution count.",
    ),
    "adiabatic-rise-high": Entry(
        "High adiabatic rise",
        "Complete conversion without exchange of heat would raise the temperature by more than 50"
        " K (common practice for screening). Runaway, decomposition and relief are not assessed;"
        " follow local codes and licensed practice.",
    ),
    "equilibrium-not-known": Entry(
        "Equilibrium not known",
        "An equilibrium that the reactor is compared with could not be computed; the size does not"
        " hang on it.",
    ),
    "rates-contradict-constant": Entry(
        "Rates contradict the equilibrium constant",
        "Forward and reverse rate balance elsewhere than the stated equilibrium constant says."
        " Check both, their units and what the constants belong to.",
    ),
    "heat-contradicts-constant": Entry(
        "Heat contradicts the equilibrium constant",
        "The enthalpy of reaction that heats are computed with, and that which the equilibrium"
        " constant's change with temperature implies (van 't Hoff), differ by more than 10 kJ/mol"
        " and 20 %. Check the signs, and that both belong to the equation as written.",
    ),
    "equilibrium-not-at-outlet": Entry(
        "Equilibrium at other conditions than the outlet's",
        "The conversion, composition and heat are those of equilibrium at the temperature held,"
        " which is not that of the measured outlet. State 'at' to have them there.",
    ),
    "approach-not-known": Entry(
        "Approach not known",
        "The readings do not tell the reaction's quotient at the outlet, or no temperature has it.",
    ),
    "fuel-with-oxidant": Entry(
        "Fuel beside an oxidant",
        "The feed holds something that burns and something that it burns with. Flammability is not"
        " assessed; follow local codes and licensed practice.",
    ),
    "gas-not-ideal": Entry(
        "The gas is not ideal",
        "The gas was taken as ideal, and an equation of state puts its Z outside 0.95 to 1.05. Ask"
        " for one of the other gas models.",
    ),
    "fugacities-not-ideal": Entry(
        "Fugacities are not those of an ideal gas",
        "The gas was taken as ideal, and by an equation of state its fugacities change an"
        " equilibrium constant in partial pressures by more than 5 %. Ask for one of the other gas"
        " models.",
    ),
    "gas-may-condense": Entry(
        "The gas may condense",
        "An equation of state has a liquid form out of the gas (of the feed or at equilibrium),"
        " which the answer takes as one phase. Check temperature and pressure.",
    ),
    "compressibility-found": Entry(
        "Z of a gas found with the account",
        "A reading of a gas counts by its Z, which follows from the composition by the gas model."
        " The uncertainties count that it moves with the account, and take the model itself, and"
        " the conditions at a meter, as exact in it.",
    ),
    "no-redundancy": Entry(
        "No redundancy",
        "The readings just suffice: none of them is checked by the others.",
    ),
    "ill-conditioned": Entry(
        "Ill-conditioned",
        "The readings barely tell the unknowns apart, as the uncertainty of the answer says.",
    ),
    "meter-corrected": Entry(
        "Flow of a meter corrected",
        "A differential-pressure meter shows a flow for its design density; the account takes the"
        " flow at the density that the gas has.",
    ),
    "meter-far-from-design": Entry(
        "Meter far from its design",
        "The gas is more than twice as dense as a differential-pressure meter was laid out for, or"
        " less than half. Check the conditions and units stated.",
    ),
    "negative-flow": Entry(
        "Flow below zero",
        "The readings put a flow below zero by more than twice its uncertainty. Look for a wrong"
        " reading, basis or removal, or a missing reaction.",
    ),
    "one-way-reaction-backwards": Entry(
        "One-way reaction runs backwards",
        "The readings put the extent of a one-way reaction below zero by more than twice its"
        " uncertainty. Write it both ways, or look for a wrong reading.",
    ),
    "residual-above-content": Entry(
        "Residual above content",
        "The sample is said to keep more of a removed substance than the stream holds of it.",
    ),
    "sample-may-be-dried": Entry(
        "Was the sample dried?",
        "An analysis adds up to 100 % without substances that its stream holds. Name what was"
        " removed from the sample under 'removed'.",
    ),
    "readings-inconsistent": Entry(
        "Readings contradict each other",
        "Chi-square is above its limit. See 'suspects' and 'without_suspect'.",
    ),
    "limit-contradicted": Entry(
        "Limit contradicted",
        "A detection limit or range end disagrees with the other readings. See 'without_suspect'.",
    ),
    "alternatives-not-all-given": Entry(
        "Not all alternatives given",
        "More ways to leave out suspect readings exist than are listed.",
    ),
    "nothing-left-without-suspects": Entry(
        "Nothing left without suspects",
        "Without the suspect readings the others do not settle an account, or none comes near"
        " them, so no 'without_suspect' is given.",
    ),
    "yield-factor-missing": Entry(
        "Yield factor missing",
        "The reactions that make a product do not all consume the key at one ratio. State 'per_key'"
        " or an element basis.",
    ),
    "denominator-near-zero": Entry(
        "Denominator near zero",
        "A ratio is null because its denominator is within twice its uncertainty of zero, or zero"
        " but for rounding.",
    ),
    "conversion-poorly-known": Entry(
        "Conversion poorly known",
        "The readings say little of the conversion.",
    ),
    "space-time-yield-needs-flow": Entry(
        "Space-time yield needs a flow",
        "No reading tells how much flows, so that what is made by the size of the reactor is not"
        " known. State a flow.",
    ),
    "size-taken-as-exact": Entry(
        "Size taken as exact",
        "The size of the reactor, or the time of the batch, came without an uncertainty and was"
        " taken as exact. State 'u' or 'u_rel' where it counts.",
    ),
    "closure-not-read": Entry(
        "Closure not read",
        "The readings alone do not tell all of an element, in or out.",
    ),
    "closure-by-tie": Entry(
        "Closure by tie",
        "No meter tells how much leaves, and the inerts that hold the element were used to tell.",
    ),
    "closure-opaque": Entry(
        "Closure of opaque substances",
        "Substances without a formula have no elements to close.",
    ),
    "distribution-not-told": Entry(
        "Distribution not told",
        "The readings do not tell how a substance is shared out among the streams that leave.",
    ),
    "analysis-sum": Entry(
        "Analysis off 100 %",
        "The values of an analysis miss 100 % by more than their uncertainties explain.",
    ),
}
"""Codes of notes and assumptions in answers."""
