"""What is known of a crop's stage."""

from datetime import timedelta

import pytest

from rules.stages import Stage, crop_stage
from tests.builders import NOW, TODAY, a_paddock, an_observation


def ago(days: int):
    return TODAY - timedelta(days=days)


def report(stage, days_ago=0, key="csv:1", **changes):
    return an_observation(key, paddock="p1", stage=stage, day=ago(days_ago), **changes)


def test_the_newest_report_of_this_paddock_counts():
    rows = [report(11, 9), report(13, 2, "csv:2"), report(12, 5, "csv:3"), report(30, 1, "csv:4", present=False)]
    assert crop_stage(a_paddock(), rows, TODAY) == Stage(30, "reported")
    other = an_observation(paddock="p2", stage=60)
    assert crop_stage(a_paddock(), [*rows[:3], other, report(None)], TODAY) == Stage(13, "reported")


def test_of_one_day_the_last_to_arrive_counts():
    rows = [report(12, arrived_at=NOW), report(13, key="csv:0", arrived_at=NOW + timedelta(hours=1))]
    assert crop_stage(a_paddock(), rows, TODAY).code == 13


@pytest.mark.parametrize(("days_ago", "basis"), [(14, "reported"), (15, "up"), (-1, "up")])
def test_a_report_holds_for_fourteen_days_and_not_before_it_is_made(days_ago, basis):
    assert crop_stage(a_paddock(up_on=ago(20)), [report(12, days_ago)], TODAY).basis == basis


@pytest.mark.parametrize(
    ("dates", "basis"),
    [
        ({"sown_on": ago(20), "up_on": ago(9)}, "up"),
        ({"sown_on": ago(20), "up_on": ago(-2)}, "sown"),
        ({"sown_on": ago(0)}, "sown"),
        ({"sown_on": ago(-1)}, "unknown"),
        ({}, "unknown"),
    ],
)
def test_without_reports_the_dates_speak(dates, basis):
    assert crop_stage(a_paddock(**dates), [], TODAY) == Stage(None, basis)


def test_a_report_of_another_crop_is_passed_over():
    canola = a_paddock(crop="canola", sown_on=ago(5))
    assert crop_stage(canola, [report(65, 8)], TODAY).basis == "sown"
    assert crop_stage(canola, [report(12, 1, crop="lupin")], TODAY).basis == "sown"
    assert crop_stage(canola, [report(12, 1, crop="canola")], TODAY).code == 12
    assert crop_stage(a_paddock(crop="canola", sown_on=ago(-5)), [report(65, 8)], TODAY).code == 65
