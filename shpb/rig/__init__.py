"""What stands in the lab: bars, gauges, striker, specimen, and the files that describe them."""
