"""Views of evidence; they read it and run nothing."""
