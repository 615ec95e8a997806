"""The methods of a comparison in one picture."""

from doe.report.style import CYCLE, figure, percent_on_log, png
from doe.result import Result


def draw(results: dict[tuple[str, bool], Result]) -> bytes:
    """Efficiency against uniformity error, and the course of each method, as PNG.

    results: by method and whether it was refined.
    """
    made, (plane, course) = figure(12, 4.8, 2)
    methods = list(dict.fromkeys(method for method, _ in results))
    for (method, refined), result in results.items():
        colour = CYCLE[methods.index(method) % len(CYCLE)]
        mark, line = ("*", "-") if refined else ("o", ":")
        label = f"{method}, {'refined' if refined else 'as published'}"
        error = percent_on_log(result.scores["uniformity_error"] or 0.0)
        efficiency = (result.scores["efficiency"] or 0.0) * 100
        plane.plot(error, efficiency, mark, ms=10, color=colour, label=label)
        trace = result.trace
        course.semilogy(
            trace.step, percent_on_log(trace.uniformity_error), line, color=colour, label=label
        )
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
    made.suptitle(next(iter(results.values())).config.title, parse_math=False)
    return png(made)
