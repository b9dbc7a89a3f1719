"""Pure numerics: arrays and numbers in, arrays and frozen results out; no files, no study."""
