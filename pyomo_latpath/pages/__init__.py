"""What the pages share: frame, colours, escaping, tables and drawings.

A page is one file that needs nothing else: its styles, its drawings and, where it has one, its
script stand inside, and its content policy forbids the browser to fetch anything.
"""
