"""Opens a spreadsheet in a process of its own: bytes in, JSON out.

The compiled reader ends the whole process when a damaged file makes it ask for too much memory; the
workbench must not end with it. Run as a script by spreadsheet.py, so it imports nothing of the package.
"""

from __future__ import annotations

import io
import json
import sys

# Memory [bytes] that opening may take where the system can limit it; a full sheet of 2,000,000 cells takes a third.
MEMORY = 2_000_000_000


def main() -> None:
    """Reads ``max_cells`` from the arguments and the file from standard input."""
    max_cells = int(sys.argv[1])
    _limit_memory()
    from python_calamine import CalamineWorkbook

    sheets = []
    workbook = CalamineWorkbook.from_filelike(io.BytesIO(sys.stdin.buffer.read()))
    for name in workbook.sheet_names:
        sheet = workbook.get_sheet_by_name(name)
        max_cells -= sheet.height * sheet.width
        if max_cells < 0:
            sheets.append({"name": name, "first_row": 1, "rows": None})
            break
        first_row = (sheet.start or (0, 0))[0] + 1
        rows = [[_cell(value) for value in row] for row in sheet.to_python()]
        sheets.append({"name": name, "first_row": first_row, "rows": rows})
    json.dump(sheets, sys.stdout)


def _cell(value: object) -> float | str:
    if isinstance(value, (int, float)) and not isinstance(value, bool):
        return float(value)
    return str(value).strip()


def _limit_memory() -> None:
    try:
        import resource
    except ImportError:  # Windows; there a huge request fails at once by itself
        return
    resource.setrlimit(resource.RLIMIT_AS, (MEMORY, MEMORY))
    resource.setrlimit(resource.RLIMIT_CORE, (0, 0))


if __name__ == "__main__":
    main()
