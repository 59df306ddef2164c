"""`probatum schema`: the JSON Schema of test specs, for editors."""

import json

import click


@click.command("schema")
def command() -> None:
    """Print the JSON Schema (draft 2020-12) of test specs.

    An editor that knows it completes keys and shows what each means; `probatum check` says more than any schema can.
    """
    from runner.spec.schema import spec_schema  # noqa: PLC0415 - heavy

    print(json.dumps(spec_schema(), indent=2, ensure_ascii=False))
