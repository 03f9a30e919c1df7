"""Files in, checked tables out: P&L, reported forecasts, desks, changes, calendar, and remarks on them."""
