"""Everything that runs the pipeline more than once: rehearsals on known truth."""
