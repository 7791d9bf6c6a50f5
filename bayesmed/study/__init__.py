"""What was observed: formulas, rows used, roles, counterfactual rows, audit, as a frozen value."""
