"""What works on the pipeline or for it: rehearsals on known truth, calibrations of its own."""
