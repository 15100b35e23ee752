"""Even, odd or one-sided: mirror rules, scores, angles, the verdict."""
