"""The account that fits the plant's readings best, and its uncertainty.

In the order to read it:

``forms``           the one shape that every reading has, and its derivatives
``correlations``    errors that readings have in common
``readings``        from metered streams to forms
``analysis_sums``   what the fractions of an analysis add up to
``account``         the unknowns, and every stream in terms of them
``preparation``     weights, exact readings, a first guess
``observability``   what the readings leave open
``mixture``         correlated readings as combinations whose errors are independent
``gauss_newton``    weighted least squares over forms, many samples at once
``solving``         a block of samples fitted, each alone
``consistency``     what the readings say about each other; suspects
``estimate``        the account as estimated; ``remarks`` on it
``reconciliation``  the calls: one sample, a series, a feed alone
``ratios``          ratios of forms with their uncertainty
``nonlinearity``    whether linear propagation will do
``monte_carlo``     propagation of distributions by draws
``conversion``      conversion, yields, selectivities; ``closure`` of the raw readings
``feed``            a feed taken as known, however it was metered
"""
