"""The Celery application with the planning of the chaos test, as ``celery --app`` finds it."""

from __future__ import annotations

from tests.chaos.planning import work
from worker import celery_app

celery_app.plan = work
app = celery_app.app
