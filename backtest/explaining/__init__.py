"""What needs forecasting and judging together."""
