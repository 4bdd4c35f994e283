"""The report: one HTML file that opens without a network."""
