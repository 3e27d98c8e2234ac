"""The site folder: what is there. Config and tables as validated objects, log layouts as data."""
