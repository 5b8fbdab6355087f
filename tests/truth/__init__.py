"""Whether an appraisal tells the truth: faults of known onset in fresh invented streams, replayed through `pbm watch`."""
