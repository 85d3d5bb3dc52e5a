"""Every component id, in one place."""

from enum import StrEnum, unique


@unique
class Id(StrEnum):
    # State. VIEW belongs to one browser tab; REVISION says which state of the workspace the tab has seen.
    VIEW = "view"
    REVISION = "revision"
    HAND = "hand"  # what the user's hand did last: the event that becomes a step
    SCENE = "scene"  # everything that the thin layer paints beside the figure
    TRAY = "tray"
    TRAY_DRAWN = "tray-drawn"  # which tray the tab shows, so that a model change need not send it again
    TRAY_UNREAD = "tray-unread"  # sweeps whose lines the page still waits for
    TRAY_READ = "tray-read"
    DRAWN = "drawn"  # which figure the tab shows, so that a model change need not send it again
    JOB = "job"
    JOB_CLOCK = "job-clock"

    # Header
    UNDO = "undo"
    REDO = "redo"
    NOTICE = "notice"
    ERRAND = "errand"  # what the user asked for in the list of workspaces
    WORKSPACES = "workspaces"

    # Tray
    OPEN_SAMPLES = "open-samples"

    # Pair
    PAIR_PLOT = "pair-plot"
    PAIR_BARS = "pair-bars"
    PAIR = "pair"

    # Losses
    LADDER = "ladder"
    LOSSES = "losses"

    # Bench
    PLOT = "plot"
    FIRST_GUESS = "first-guess"
    REFINE = "refine"
    REFINE_ALL = "refine-all"
    CANCEL_JOB = "cancel-job"
    JOB_LINE = "job-line"
    INTERVALS = "intervals"
    INTERVALS_CLOCK = "intervals-clock"
    INTERVALS_TABLE = "intervals-table"
