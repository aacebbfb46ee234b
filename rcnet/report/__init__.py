"""Reports: results shown to people and to programs; nothing is computed here."""
