"""The angle chart of the dry-run sheet: what lies beyond the travel is told inside the chart."""

from matplotlib.text import Annotation

from app.files.chart_map import map_limits
from app.files.chart_style import drawing_style
from app.plan.check import check_plan
from app.plan_files.sheet_chart import add_chart
from app.plan_files.sheet_page import Pages
from geometry.treatment.data import PlanField
from tests.app.files.assessments import OPTIONS, SETUP


def test_numbers_of_fields_beyond_the_travel_stand_at_the_charts_edge() -> None:
    report = check_plan(SETUP, [PlanField("beyond", ((250.0, 100.0),))], OPTIONS)
    with drawing_style():
        pages = Pages("A4")
        add_chart(pages, report, None)
    texts = [text for axes in pages.page.figure.axes for text in axes.texts]
    (number,) = [text for text in texts if isinstance(text, Annotation) and text.get_text() == "1"]
    _, couch = map_limits(SETUP.room)
    assert number.xy == (-110.0, max(couch))
