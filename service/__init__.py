"""Shuntbook: track circuit records, limits and forecasts for a signalling depot."""
