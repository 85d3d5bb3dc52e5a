"""The page: header, tray, bench, dials. Static; what changes is painted into it."""
