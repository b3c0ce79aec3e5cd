"""One SQL file a version: the steps that bring a file up to date."""
