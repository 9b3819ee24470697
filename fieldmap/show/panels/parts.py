"""What the panels are built of."""

from __future__ import annotations

from html import escape
from typing import TYPE_CHECKING, Any, Final

if TYPE_CHECKING:
    from collections.abc import Iterable

    import ipywidgets

    from fieldmap.show.panels.state import Reduction

__all__ = [
    "button",
    "column",
    "hooked",
    "number_field",
    "put_on_page",
    "remembered",
    "row",
    "titled",
]

LABEL_WIDTH: Final = "86px"


def hooked(widget: Any, *names: str) -> Any:
    """Put class names on a widget: for the style sheet, and for tests to find it by."""
    for name in names:
        widget.add_class(name)
    return widget


def row(children: Iterable[Any], *names: str) -> ipywidgets.Box:
    """Widgets side by side; they wrap where there is no room."""
    import ipywidgets

    return hooked(ipywidgets.Box(tuple(children)), "fm-row", *names)


def column(children: Iterable[Any], *names: str) -> ipywidgets.VBox:
    """Widgets below each other."""
    import ipywidgets

    return hooked(ipywidgets.VBox(tuple(children)), "fm-column", *names)


def titled(title: str, children: Iterable[Any], *names: str) -> ipywidgets.VBox:
    """A section of a panel with its heading."""
    import ipywidgets

    heading = ipywidgets.HTML(f'<h4 class="fm-heading">{escape(title)}</h4>')
    return column((heading, *children), "fm-section", *names)


def number_field(label: str, *names: str) -> ipywidgets.FloatText:
    """A number to type, with its label; it counts once Enter is pressed or the field is left."""
    import ipywidgets

    field = ipywidgets.FloatText(
        description=label, continuous_update=False, style={"description_width": LABEL_WIDTH}
    )
    return hooked(field, "fm-number", *names)


def button(text: str, tooltip: str, *names: str) -> ipywidgets.Button:
    """A button that says what it does."""
    import ipywidgets

    return hooked(ipywidgets.Button(description=text, tooltip=tooltip), "fm-button", *names)


def remembered(state: Reduction, name: str, widget: Any) -> None:
    """Keep the value of a widget with the campaign."""
    state.remember(name, lambda: widget.value, lambda value: setattr(widget, "value", value))
    widget.observe(lambda _: state.keep(), names="value")


def put_on_page(widget: Any, title: str) -> None:
    """Show a widget, with words for viewers that only show what a notebook keeps.

    Parameters
    ----------
    widget : ipywidgets.DOMWidget
        To show.
    title : str
        What it is.
    """
    from IPython.display import display

    words = f"{title}: a live panel. Open this notebook in JupyterLab and run it to use it."
    bundle = {**widget._repr_mimebundle_(), "text/plain": words}
    bundle["text/html"] = f'<p class="fm-remark">{escape(words)}</p>'
    display(bundle, raw=True)  # type: ignore[no-untyped-call]
