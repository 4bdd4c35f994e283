"""Maps and totals of the CO2 that rock weathering takes up, with error bars."""
