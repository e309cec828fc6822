"""The nightly job: from a series of readings to what the reactor did, in the order of the work.

``rules``      what a data sheet says of time, readings, running and campaigns
``columns``    readings in SI, sample by sample, with why a value was left out
``timeline``   stamps in order: duplicates, gaps, campaigns, running, time on stream
``screening``  which values of a reading count: quality, range, frozen, spikes, lag, validity
``series``     rows as they came made into samples, by the rules
``operated``   how the reactor was run, sample by sample, and what its design makes of that
``activity``   by how much the design's rates must be multiplied to meet what was measured
``decline``    the activity over the time on stream, and when it meets a limit
"""
