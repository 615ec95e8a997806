"""The methods of a comparison in one picture."""

from doe.report.style import CYCLE, figure, png
from doe.result import Result


def draw(results: list[Result]) -> bytes:
    """Efficiency against uniformity error, and the course of each method, as PNG."""
    made, (plane, course) = figure(12, 4.8, 2)
    for number, result in enumerate(results):
        colour = CYCLE[number % len(CYCLE)]
        error = (result.scores["uniformity_error"] or 0.0) * 100
        efficiency = (result.scores["efficiency"] or 0.0) * 100
        plane.plot(error, efficiency, "o", ms=9, color=colour, label=result.method)
        trace = result.trace
        course.semilogy(trace.step, trace.uniformity_error * 100, color=colour, label=result.method)
    plane.set_xscale("log")
    plane.set(
        title="drawn masks: up and left is better",
        xlabel="uniformity error (%)",
        ylabel="efficiency (%)",
    )
    course.set(title="the drawn design on the way", xlabel="step", ylabel="uniformity error (%)")
    for axes in (plane, course):
        axes.legend()
        axes.grid(alpha=0.3, which="both")
    made.suptitle(results[0].config.title)
    return png(made)
