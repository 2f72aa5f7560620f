"""Early rules: what a healthy rig would show now, learned from itself, and how far it is from that.

They make tags that alarms look at, minutes before a limit. Never here: a stop, an order, anything of the recipe's run.
"""
