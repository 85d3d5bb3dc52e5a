"""Callbacks: each translates an event into a step, or a workspace into what the page shows; nothing else."""

from . import arrivals, batch, compare, fits, hand, history, intervals, show, workspaces

ACTIVITIES = (show, hand, history, fits, batch, workspaces, compare, intervals, arrivals)
