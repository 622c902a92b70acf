"""The language server: the services of the grammar and a session's results, spoken as LSP 3.17."""
