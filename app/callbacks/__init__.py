"""Callbacks: each translates an event into a step, or a workspace into what the page shows; nothing else."""

from . import arrivals, batch, compare, hand, intervals, show, workspaces

ACTIVITIES = (show, hand, batch, workspaces, compare, intervals, arrivals)
