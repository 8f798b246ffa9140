"""Principal components and what stands beside them: how many are real, what they go with, how blocks agree."""
