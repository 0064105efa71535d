"""The control register of an office: from many books to one answer per mark, with the evidence it rests on.

connect, migrations, kinds, store   the file: a chain of entries and the evidence they name
fold                                what the entries say: books, marks, decisions, published coordinates
from_book, evidence, adding         a verified book into the register
audit                               does a register file hold
"""
