"""Electric field models, one file each."""
