"""Why a request cannot be met, how far it can, and the way out (contract, section 7).

`diagnose.py` is the order of work; each other module is one step of it or one notion.
"""
