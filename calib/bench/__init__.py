"""The use cases: one verb a file. Alone in seeing both the store and the numerical core."""
