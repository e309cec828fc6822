"""The calculations: arrays in SI, frozen dataclasses, refusals of its own.

The folders read as the chapters of the job:

``substances``        formulas, molar masses, properties of pure substances
``reactions``         equations, their balance, the stoichiometric matrix
``streams``           what flows in and out, and at what conditions
``mole_account``      the stoichiometric table and how far the extents can go
``outlet_analysis``   the account estimated from plant readings
``rates``             rate laws and their constants
``thermochemistry``   heats and equilibrium constants of reactions, adiabatic temperatures
``real_gas``          cubic equations of state, and whether a gas condenses
``equilibrium``       the composition at which reactions come to rest
``reactors``          how big, what comes out, how to run: the way of one reaction, marches,
                      tanks, trains
``performance``       a series of samples: which readings count, and what the reactor did
``numerics``          recorded calculations, quadrature, roots and integration used by the chapters
"""
