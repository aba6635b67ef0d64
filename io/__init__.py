"""Case files, stores, figures and the command line."""
