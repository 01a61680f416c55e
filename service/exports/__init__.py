"""Stored results in the forms that other programs and people take away.

Nothing of the antenna is computed; a bill only adds the margins and allowances that it tells.
"""
