"""The other forms in which a circuit is handed on: a deck made through a template, a library's subcircuit."""

from .decks import deck_templates, sealed_deck
from .subcircuits import sealed_subcircuit

__all__ = ["deck_templates", "sealed_deck", "sealed_subcircuit"]
