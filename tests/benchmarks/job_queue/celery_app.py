"""The Celery application with the planning of the benchmark, as ``celery --app`` finds it."""

from __future__ import annotations

from tests.benchmarks.job_queue.planning import work
from worker import celery_app

celery_app.plan = work
app = celery_app.app
