"""Statistics: priors, the hierarchy, both faces of the model, and its sampling. Knows no files."""
