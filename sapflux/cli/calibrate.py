"""`sapflux calibrate`: a species' own calibration from a table of gravimetric flux."""

from dataclasses import asdict

from sapflux.cli import DONE
from sapflux.cli.text import columns, note, print_json
from sapflux.study import calibration as study
from sapflux.study.calibration_plot import draw


def calibrate(options):
    """Fit a calibration, print it with a row for the register, and draw its residuals."""
    found = study.calibrate(options.table, species=options.species, name=options.name)
    plot = study.plot_path(options.out, found.name)
    draw(found, plot)
    law = found.law
    if options.json:
        shown = asdict(law) | {"covariance": law.covariance.tolist()}
        print_json({"calibration": found.name, "species": found.species, "heating": found.heating,
                    **shown, "register": study.register_row(found), "plot": str(plot)})  # fmt: skip
        return DONE
    print(f"{options.table}: {found.source}, heating {found.heating}\n")
    rows = [
        ["factor, g m-2 s-1", f"{law.factor:.4g}", f"{law.ln_factor_error:.4f} of its logarithm"],
        ["exponent", f"{law.exponent:.4f}", f"{law.exponent_error:.4f}"],
        ["correlation of both errors", f"{law.error_correlation:+.3f}", ""],
        ["residual spread", f"{law.residual_spread:.1%}", ""],
        ["range of the flow index", f"{law.lowest:.4g} to {law.highest:.4g}", ""],
    ]
    for line in columns(rows, ["", "value", "standard error"], right=["value"]):
        print(f"  {line}")
    print(f"\n  Standard errors {study.covariance_in_words(law)}.")
    print("  Mean flux density = factor * flow index ^ exponent; its spread is a share of it.")
    if not found.species:
        print(note("the row has no species yet: write it in, or name it by --species"))
    print(f"\n  To paste into calibrations.csv:\n\n{study.register_text(found)}")
    print(f"  Written: {plot}")
    return DONE
