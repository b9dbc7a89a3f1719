"""What the user wants: study.yaml and its tables, read, checked and refused in one pass."""
