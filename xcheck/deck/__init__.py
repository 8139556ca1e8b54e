"""Deck text to cards: numbers, includes, logical lines. Knows nothing of amplifiers."""
