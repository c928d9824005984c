"""A whole set of rules looked over: sheets of steels, methods compared, figures guarded, directions, soundness."""
