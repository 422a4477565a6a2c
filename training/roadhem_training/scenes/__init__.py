"""Invented scenes: vector truth first, in metres, then what a camera would make of it. No torch here."""
