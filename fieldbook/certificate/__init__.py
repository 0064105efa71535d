"""The certificate: every statement as data first, then paper. Nothing here knows SQLite, screens or commands."""
