"""Jobs: how long work goes on, and stopping it."""

from typing import Any

from flask_openapi import APIBlueprint, Tag

from ..jobs import Job
from ..problems import Problem
from ..services import services
from .models import JobPath

blueprint = APIBlueprint("jobs", __name__, url_prefix="/api/jobs", abp_tags=[Tag(name="jobs")])
ORDINALS = {1: "next", 2: "second", 3: "third"}


def serialise(job: Job) -> dict[str, Any]:
    """JOB of the API. A failed job carries its problem."""
    text = job.text
    if job.state == "queued":
        place = services().jobs.place(job)
        text = f"Waiting, {ORDINALS.get(place, f'{place}th')} in line" if place else "Waiting"
    problem = None
    if job.error is not None:
        problem = Problem(
            500, job.error["code"], "The work could not be finished", job.error["message"], path=job.error.get("path")
        ).to_dict()
        problem.pop("status")  # a job's problem is no HTTP answer
    return {
        "id": job.id,
        "kind": job.kind,
        "state": job.state,
        "share": round(job.share, 4),
        "text": text,
        "result_url": job.result_url,
        "problem": problem,
    }


@blueprint.get("/<job>")
def read(path: JobPath) -> dict[str, Any]:
    """How far a job is."""
    return serialise(_find(path.job))


@blueprint.delete("/<job>")
def stop(path: JobPath) -> dict[str, Any]:
    """Stop a job; an ended one stays as it is."""
    job = _find(path.job)
    services().jobs.cancel(job)
    return serialise(job)


def _find(job_id: str) -> Job:
    job = services().jobs.get(job_id)
    if job is None:
        detail = "Jobs are forgotten when the server restarts. Nothing that was kept is lost; start the work again."
        raise Problem(404, "no-such-job", "There is no such job", detail)
    return job
