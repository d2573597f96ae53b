"""Imported, and thereby warmed up, by the process from which those of single jobs are forked."""

from workers.pipeline import warm_up

warm_up()
