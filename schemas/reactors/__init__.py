"""The reactor questions on the wire: how big, what comes out, and where to run it.

Each of ``kinds``, ``thermal`` and ``targets`` has one schema for each form under one constant;
``request`` is what the three questions share, ``volume``, ``rating`` and ``operating_point`` the
questions, ``answer`` and ``page`` what comes back.
"""
