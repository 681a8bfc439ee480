"""Amounts from known pure spectra."""
