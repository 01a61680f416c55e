"""The Celery application with an invented planning, as ``celery --app`` finds it."""

from __future__ import annotations

from tests.service.plans import as_named
from worker import celery_app

celery_app.plan = as_named
app = celery_app.app
