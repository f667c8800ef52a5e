"""Sensitivity of every station: pulses against each other, the striker's line, shunts, reconciled; bending."""
