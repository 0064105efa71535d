"""Salvage: what a damaged book still holds, read page by page from a copy, without trusting SQLite's own way through it.

    pages      the bytes of BOOK and BOOK-wal as page images       cells      table leaf cells -> rows
    gather     rows -> entries, chunks, packs, tail by proof       bits       one flipped bit put right, proven by a hash
    streams    what each occupation received, and what is missing  write      the new book

Written after the file format that SQLite publishes (sqlite.org/fileformat2.html, sections 1.3 to 1.6 and 4.1). A row of
`entry`, `raw_tail`, `raw_chunk` and `raw_pack` is never changed once it is written, so every image of a page that is
found anywhere (an older frame of the -wal, a page given up) can only hold rows that once stood; hashes say which.
"""
