"""The dossier on disk: an SQLite ledger that survives a kill at any moment, and the files beside it."""
