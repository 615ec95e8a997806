"""`doe run`: designs a job by the first of its methods."""

from pathlib import Path

import click

from doe.cli.common import (
    CONFIG,
    default_out,
    output_options,
    print_json,
    print_result,
    result_json,
)


@click.command(epilog="Example: doe run configs/needle_mill.toml --out needle_mill")
@click.argument("config", type=CONFIG)
@click.option("--out", type=CONFIG, help="Output folder; default: beside the config, same name.")
@click.option("--seed", type=click.IntRange(0, 2**32 - 1), help="Seed in place of the config's.")
@click.option("--resume", is_flag=True, help="Go on with a stopped run; a finished one is shown.")
@output_options
def run(
    config: Path,
    out: Path | None,
    seed: int | None,
    resume: bool,
    as_json: bool,
    quiet: bool,
    no_color: bool,
) -> int:
    """Design the job in CONFIG and save the record.

    Uses the first method the config lists, from many starts, and then searches the levels exactly.
    What reaches the limits is kept first, then what has the most light. Leaves record.h5,
    trace.jsonl and overview.png.
    """
    from doe import files
    from doe.cli.session import RECORD, checkpoint_facts, design_into, finished
    from doe.config.load import check_designable, load, seeded
    from doe.report.overview import draw

    job, text = load(config)
    check_designable(job, config)
    job = seeded(job, seed)
    folder = out or default_out(config)
    record = folder / RECORD
    with files.output_folder(folder):
        method = job.solver.methods[0]
        if resume and record.exists():
            result = finished(record, checkpoint_facts(job, method))
        else:
            files.refuse_existing(record, "give --resume to see it, or another --out")
            result = design_into(folder, (job, text), method, resume=resume, quiet=quiet)
            files.write(folder / "overview.png", draw(result))
    if as_json:
        print_json(result_json(result, record))
    else:
        print_result(result, no_color=no_color)
        print(f"record: {record}")
    return int(result.status == "missed")
