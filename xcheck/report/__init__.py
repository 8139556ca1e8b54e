"""One review in several forms. Computes nothing."""
