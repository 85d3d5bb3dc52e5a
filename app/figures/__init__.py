"""Figures: functions of core objects that return a Plotly figure."""
