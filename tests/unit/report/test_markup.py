"""Nothing from a file becomes markup."""

from __future__ import annotations

from schorl.report.markup import join, shape, table, tag, text

NASTY = "<script>alert(1)</script>\"'&"


def test_text_attributes_and_cells_are_escaped():
    made = [
        text(NASTY),
        tag("p", NASTY, title=NASTY),
        shape("text", {"aria-label": NASTY}, NASTY),
        table([NASTY], [[NASTY, NASTY]], caption=NASTY),
        join([NASTY, "x"], NASTY),
    ]
    for markup in made:
        assert "<script" not in markup
        assert "alert(1)" in markup
    assert tag("p", title=NASTY).count('"') == 2


def test_markup_is_not_escaped_twice():
    assert tag("p", tag("b", "a & b")) == "<p><b>a &amp; b</b></p>"


def test_only_figures_keep_to_the_right():
    made = table(["Zone", "Rate", "Why"], [["1", "12.0", "need 3"]], caption="c")
    assert made.count('class="figure"') == 2  # the figure and its heading
