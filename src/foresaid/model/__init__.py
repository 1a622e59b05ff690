"""What every room speaks: errors, issues, arrays, the codebook."""
