"""The reference problems, one file each."""
