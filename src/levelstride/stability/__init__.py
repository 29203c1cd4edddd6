"""Is the step bounded: eigenvalues, powers and symbols of the step matrix."""
