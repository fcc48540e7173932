"""The schemes that the bench measures, one file each."""
