"""The book: one SQLite file, in which nothing is ever erased.

    store.Book        create, open, append, read: what everything above uses
    lock              who records: the lock file BOOK.lock
    audit             does a book hold? never raises, whatever the file
    migrations, chain, kinds, raw, epochs, fold, connect, foreign      its parts

Nothing else opens BOOK, BOOK-wal or BOOK-shm, and these only through sqlite3 (`foreign` says why it may copy).
"""
