"""Stands in for the Dash app while callbacks are registered, and hands their functions out by name."""

from collections.abc import Callable
from typing import Any


class Desk:
    def __init__(self, activity: Any, store: Any, jobs: Any = None):
        self._functions: dict[str, Callable] = {}
        activity.register(self, store, jobs)

    def callback(self, *wires: Any, **options: Any) -> Callable:
        def keep(function: Callable) -> Callable:
            self._functions[function.__name__] = function
            return function

        return keep

    def __getattr__(self, name: str) -> Callable:
        return self._functions[name]
