"""The rules of the business, one a file: its equation on top, then what it adds to a model.

Sign: power is positive into the grid. Every rule is replayed by the audit, with which it shares no code.
"""
