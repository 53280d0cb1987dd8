"""``massfingerprint study``: one file in, a folder of answers out."""

from pathlib import Path

import click

from massfingerprint.cli._progress import progress
from massfingerprint.study.folder import SUMMARY_TEXT, as_json, study_tables
from massfingerprint.study.inputs import read_study
from massfingerprint.study.plan import plan
from massfingerprint.study.run import KEPT, Study, run_study
from massfingerprint.study.summary import summary_data, summary_text


@click.command(name="study")
@click.argument("study_file", metavar="STUDY.toml", type=click.Path(path_type=Path))
@click.option("--check", is_flag=True, help="Only check the file and say what will be done: sizes, memory, time.")
@click.option("--replace", is_flag=True, help="Replace the folder if it is there, once the new one is complete.")
@click.option("--quiet", is_flag=True, help="No talk on stderr; the summary still goes to stdout.")
@click.option("--verbose", is_flag=True, help="Say how long each stage took.")
@click.option("--json", "as_data", is_flag=True, help="Print the summary as JSON with full numbers.")
def command(study_file: Path, check: bool, replace: bool, quiet: bool, verbose: bool, as_data: bool) -> int:
    """Run a study: mass record [Gt] to global mean and sea level at coasts [mm, mm/yr], with maps and curves.

    STUDY.toml names the mass record, the regions, the sites and the windows. Results go to the folder "out" beside it (or
    [output] folder): NetCDF, tables, figures, a summary. Solved patterns are kept in "massfingerprint-cache" beside that
    and used again.

    Example: massfingerprint study data_small/demo_study.toml
    """
    if check:
        recipe, inputs = read_study(study_file)
        click.echo("\n".join([*plan(recipe, inputs), "Nothing is wrong with it; nothing was run."]))
        return 0
    try:
        with progress(quiet=quiet) as report:
            study = run_study(study_file, replace=replace, progress=report)
    except KeyboardInterrupt:
        click.echo(f"massfingerprint: stopped; the folder is as it was. Solved patterns are kept in {KEPT}.", err=True)
        return 130
    tables = study_tables(study)
    click.echo(as_json(summary_data(study, tables)) if as_data else summary_text(study, tables), nl=False)
    if not quiet:
        _talk(study, verbose)
    return 0


def _talk(study: Study, verbose: bool) -> None:
    for words in study.account["damaged"]:
        click.echo(f"massfingerprint: {words}", err=True)
    if verbose:
        for stage, seconds in study.account["seconds"].items():
            click.echo(f"{stage:18}{seconds:8.2f} s", err=True)
        click.echo(
            f"patterns taken from kept ones: {study.account['reused']} of {study.patterns.sizes['source']}", err=True
        )
    click.echo(f"Written to {study.folder}; start with {SUMMARY_TEXT}.", err=True)
