"""The embedded store: readings, ledger, outbox, rollups, queries; the only room that knows SQLite."""
