"""The invented desk of a small island utility that buys fuel, power and currency; its data are made up."""

from driftbook.store.demo.mornings import run_demo

__all__ = ["run_demo"]
