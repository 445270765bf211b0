"""From digitized curves to parameters: weights, start values, choice of form, the fit, and how sure it is."""
