from pathlib import Path

import pytest

from app.cautions import CAUTIONS

README = Path(__file__).parents[2] / "README.md"


@pytest.mark.parametrize("caution", CAUTIONS)
def test_the_readme_holds_every_caution(caution: str) -> None:
    words = " ".join(README.read_text(encoding="utf-8").split())
    assert caution in words


@pytest.mark.parametrize("caution", CAUTIONS)
def test_a_caution_is_one_sentence_on_one_line(caution: str) -> None:
    assert caution.isprintable()
    assert caution.endswith(".")
    assert caution.count(".") == 1


def test_no_caution_is_missing() -> None:
    told = " ".join(CAUTIONS).casefold()
    for matter in ("planning aid", "surveyed", "accepted", "medical physicist", "interlocks", "local procedures"):
        assert matter in told
    for matter in ("unloaded machine", "watch the patient", "no guarantee", "moved", "device", "set-up"):
        assert matter in told
