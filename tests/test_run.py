from pathlib import Path

import pytest

from generator.run import Progress
from tests.sample import light_pages, make_job, put_campaign, run, text_of


def test_progress_is_told_now_and_then() -> None:
    """Campaigns done and to do and the time left at the speed so far, every five seconds and not at the end."""
    moments = iter((0.0, 1.0, 4.9, 6.0, 10.0, 12.0, 14.0, 60.0))
    said: list[str] = []
    progress = Progress(4, said.append, clock=lambda: next(moments))
    for _ in range(3):
        progress.tick()
    for _ in range(4):
        progress.count()
    assert said == ["0 of 4 campaigns done, 4 to do", "2 of 4 campaigns done, 2 to do, about 12 s left"]


@pytest.mark.parametrize("way", ["in place", "by renaming"])
def test_a_page_edited_by_hand_is_made_again(tmp_path: Path, way: str) -> None:
    """A page saved over by an editor is made again by the next build; one written into, by a thorough one."""
    put_campaign(tmp_path / "campaigns")
    page = tmp_path / "output/spring/orders/1.html"
    with light_pages():
        run(make_job(tmp_path))
        good = page.read_text()
        if way == "in place":
            page.write_text("my words")
        else:
            page.with_suffix(".new").write_text("my words")
            page.with_suffix(".new").replace(page)
        assert run(make_job(tmp_path), thorough=way == "in place").made == ("spring",)
    assert text_of(tmp_path / "output", "spring/orders/1.html") == good
