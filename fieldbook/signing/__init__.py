"""Signatures: what is signed, with which key, and what a signature proves.

    ed25519      the primitive (RFC 8032), the only module that imports `cryptography`, and that lazily
    pkcs8        a secret key as PKCS#8 PEM, with or without a passphrase
    message      the exact bytes that are signed, and the fingerprint of a key
    public_key   a name and a public key, as the small TOML file people hand to each other
    key_file     the private key file: a PEM that says whose it is
    keyring      the user's own keys and the keys the user trusts
    signer       a key ready to sign
    in_book      entries signed as they are written
    judge        what the signatures of a book show

A key is optional everywhere. A signature says that whoever holds a key stood for something; whose key it is, the reader
has to know from elsewhere. It carries no trusted time.
"""
