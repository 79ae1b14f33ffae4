"""Predictions: responses of parts under duties, shares and bounds, margins. Knows draws and kernels, no sampler."""
