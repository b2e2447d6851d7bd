"""A folder of studies -> a folder of results, resumable; one bad study never stops the rest."""

from liverfe.batch.listener import BatchListener
from liverfe.batch.plan import plan_batch
from liverfe.batch.work import run_batch

__all__ = ["BatchListener", "plan_batch", "run_batch"]
