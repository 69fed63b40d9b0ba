"""From a person's tables to a first ladder file: what can be told is filled in, the rest is open.

Every column gets its role from its name, its unit and its values; what remains
unclear is written as a text that begins with ``undecided:``, which reading a
ladder refuses, one line per key, until a person has put a value in its place.
"""

from ladderfit.draft.make import Draft, draft_ladder, draft_of, write_draft

__all__ = ["Draft", "draft_ladder", "draft_of", "write_draft"]
