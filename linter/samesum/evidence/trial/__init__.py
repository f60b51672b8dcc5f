"""What every route gives for given projects: values, extremes, proofs, who moves the number."""
