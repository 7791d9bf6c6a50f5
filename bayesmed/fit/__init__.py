"""PyMC models, coefficient priors, sampling, diagnostics and storage: from an observed study to frozen draws."""
