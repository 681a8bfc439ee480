"""Tables, figures and pages: reads results, computes nothing new."""
