"""Does one process explain a group of sites: models, fits, the test."""
