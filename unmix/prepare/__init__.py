"""Preparing spectra: baselines, smoothing, scatter, scale and axis, as scikit-learn transformers.

Each step takes and returns labelled arrays (or plain ones) and says whether it keeps Beer-Lambert additivity.
What finds amounts belongs in ``solve``.
"""
