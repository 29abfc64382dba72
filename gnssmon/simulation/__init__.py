"""A receiver with known truth: physics in, NMEA out. Shares no computation with what it is meant to test.

Its whole face: ``generator.generate`` and ``generator.Generator``, ``scenario.load_scenario``,
``scenario.scenario_names``.
"""
