"""Element sets: reading every format, choosing among several, and one orbit source for each spacecraft."""
