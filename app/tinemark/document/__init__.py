"""The session: ledger, views, saving and export."""
