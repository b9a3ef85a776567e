"""Words of a set-up that more than one module speaks."""

from typing import Literal

Landmark = Literal["vertex", "chin", "sternal notch", "xiphoid", "navel", "symphysis"]
