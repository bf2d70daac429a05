"""Questions put to a combined object: values, standard errors, intervals, reach, labels."""
