"""The record of an answer: frozen plain data, its files, and how these are written whole."""
