"""Error rates of the verdicts, measured on simulated data sets."""
