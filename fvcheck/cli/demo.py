"""``fvcheck demo``."""

from __future__ import annotations

from fvcheck.cli.options import Output, spread


@spread
def command(output: Output) -> int:
    """Show the bundled case, end to end: an early iteration fails, the converged run closes."""
    from fvcheck.cli.output import check_target, history_data, show
    from fvcheck.demo import folder, run_demo
    from fvcheck.text.demo import demo_text

    check_target(output)
    place = folder()
    demo = run_demo(place)
    show(
        output,
        lambda: history_data([demo.early, demo.converged]),
        lambda: demo_text(demo, place, output.quiet),
    )
    return 0 if demo.as_expected else 1
