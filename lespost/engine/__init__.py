"""Tasks, threads, memory budget, journal, resume, progress. Knows nothing of turbulence."""
