"""Bytes and topics to readings, or to a reason why not. Pure: no clock, no files, no database."""
