"""Files → validated, frozen objects; every value with its file, line and unit; checks before solving."""
