"""Prefect flows of treering: a few lines each around `treering.update`.

Import `treering_flows.engine` first: it sets the engine's defaults before Prefect is loaded.
"""
