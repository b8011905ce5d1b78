"""What results mean: plans and reductions, pure functions without files."""
