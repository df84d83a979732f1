"""The console: what a person uses to command a fleet, and what they look at afterwards.

Reading order: view.py, core.py, engine.py, fleet.py, orders.py, dispatch.py, cli.py.
"""
