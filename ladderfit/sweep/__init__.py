"""Many fits, or anything else that is done many times: on one core, many, or a cluster."""

from ladderfit.sweep.job import Job, Outcome, Task
from ladderfit.sweep.records import read_records
from ladderfit.sweep.run import sweep, task_seed

__all__ = ["Job", "Outcome", "Task", "read_records", "sweep", "task_seed"]
