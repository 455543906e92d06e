"""The steps of reference.py, one file each."""
