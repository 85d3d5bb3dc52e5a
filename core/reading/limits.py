"""How much one file may hold, so that no file can stall the workbench."""

MEGABYTE = 1_000_000

# Bytes of one file; a sweep of 1000 points takes about 30 kB, so this is a thousand of them.
MAX_BYTES = 32 * MEGABYTE
# Cells of one file or of all its sheets together; bounds memory and reading time.
MAX_CELLS = 2_000_000
# Columns of a table; more is a matrix of something else.
MAX_COLUMNS = 1000
# Sweeps that one file may give; more would flood the tray.
MAX_SWEEPS = 2000
# Bytes of a spreadsheet once unpacked; a small zip can hold a very large one.
MAX_UNPACKED = 128 * MEGABYTE
# Lines without any number; bounds the time spent on reading words.
MAX_TEXT_LINES = 20_000
# Header entries that are kept with a sweep.
MAX_HEADER = 300
# Characters that are kept of one header value or label.
MAX_WORDS = 300
# Points without which a sweep says nothing.
MIN_POINTS = 3
# Broken rows that may be left out: this many, or the share below, whichever is more.
MAX_BROKEN_ROWS = 3
MAX_BROKEN_SHARE = 0.02
# Seconds for opening one spreadsheet.
MAX_SECONDS = 30
# Voltage [V], density [A cm⁻²] and current [A] that no sweep has at most of its points. ``core.reach`` cautions far below.
MAX_VOLTS = 10_000.0
MAX_DENSITY = 1e6
MAX_AMPERES = 1e6
