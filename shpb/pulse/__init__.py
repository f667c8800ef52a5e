"""From voltage to the three pulses: bridge, zero line, noise, arrivals, feet and windows."""
