"""Imported by the server that workers are forked from: it is deaf to the signals that ask a run to come to an end.

A batch system sends them to every process of a job.  The workers are to finish what they are at, so they must not hear
them from their birth on, and the server must live to fork others.
"""

from scatterpump.sweep.worker import ignore_requests

ignore_requests()
