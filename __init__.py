"""skipline: decide how far an MR scan can be accelerated.

The package has three parts: `skipline.masks` (sampling patterns), `skipline.phantoms` (objects with
closed-form k-space, and their acquisition) and `skipline.recon` (reconstruction, comparison with a
reference, studies, reports). Importing `skipline` alone is cheap: nothing heavy is loaded until it is used.

Outputs are for research and protocol prototyping, not for diagnosis.

Examples
--------
>>> import skipline
>>> issubclass(skipline.InputError, ValueError)
True
"""

__version__ = "0.1.0"

CAUTION = (
    "For research and protocol prototyping on phantoms and reference data; not for diagnosis. Whether an "
    "accelerated protocol may be used on people is for licensed clinical practice and local regulation to "
    "decide. Sampling tables say nothing of SAR, nerve stimulation, gradient heating or acoustic limits: "
    "the scanner's own safety checks stay in force."
)


class InputError(ValueError):
    """What the user gave cannot be used; the message is one line that says what, where and what instead."""


__all__ = ["CAUTION", "InputError", "__version__"]
