"""Kinds of object that the target might be: what each predicts, and what the limits leave of it."""
