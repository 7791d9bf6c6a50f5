"""Study, Fit, Comparison and Tipping as users meet them: one-line methods over the rooms, and reprs."""
