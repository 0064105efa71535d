"""Fieldbook: the field book of a static GNSS occupation, from the receiver's bytes to the certificate."""

__version__ = "0.1.0"
