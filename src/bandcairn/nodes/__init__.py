"""The plan: which nodes a study consists of, and the key of each. Decides; runs nothing."""
