"""The outside: units, files that the user owns, and files of results. Units exist in this layer only."""
