"""A page for each type of problem, at the address that the problem's `type` names. Open to all."""

from __future__ import annotations

from flask import Blueprint, abort, render_template

from service.api import problems

blueprint = Blueprint("problems", __name__, url_prefix="/problems", template_folder="templates")


@blueprint.get("")
def list_problem_types() -> str:
    """List every type of problem."""
    return render_template("api_problems.html", problems=problems.CATALOGUE)


@blueprint.get("/<name>")
def show_problem_type(name: str) -> str:
    """Say what one type of problem means, and what to do about it."""
    problem = problems.BY_NAME.get(name)
    return render_template("api_problem.html", problem=problem) if problem else abort(404)
