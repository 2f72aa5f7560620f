"""The half that stops: judged signals, conditions, voting, latches, alarms and stops.

Reads nothing that the sequence wrote and imports nothing of it; no trip waits for anything outside this room.
"""
