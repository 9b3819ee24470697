"""One notebook in a browser: run it, ask what it shows."""

from __future__ import annotations

RUN_MS = 180_000  # a loaded machine solves slowly
APART = 0.01  # of the width of a picture: columns closer than that are one line
PICTURE = ".fm-live canvas, .fm-picture-box img"  # a live figure, or a picture where it is none
WORDS = ".fm-picture-box"  # what the figure shows, in words

READY = """async () => {
  const app = window.jupyterapp; await app.restored;
  const notebook = app.shell.currentWidget; await notebook.context.ready;
  await notebook.context.sessionContext.ready;
}"""
RUN = "() => window.jupyterapp.commands.execute('notebook:run-all-cells')"
# a failing cell keeps those after it from running
DONE = """() => {
  const notebook = window.jupyterapp.shell.currentWidget;
  const kernel = notebook.context.sessionContext.session.kernel;
  const code = [...notebook.content.widgets].filter(cell => cell.model.type === 'code');
  const failed = code.some(cell => (cell.model.sharedModel.outputs ?? [])
    .some(output => output.output_type === 'error'));
  return kernel.status === 'idle' && (failed || code.every(cell => cell.model.executionCount));
}"""
ERRORS = """() => [...window.jupyterapp.shell.currentWidget.content.widgets]
  .flatMap(cell => cell.model.sharedModel.outputs ?? [])
  .filter(output => output.output_type === 'error' || output.name === 'stderr')
  .map(output => output.evalue ?? output.text)"""
# How many pixels of a picture have a colour, and, as shares of its width, the columns of which
# a quarter has it: where vertical lines of that colour stand.
COLOUR = """([selector, colour]) => {
  const image = document.querySelector(selector), live = image instanceof HTMLCanvasElement;
  const size = live ? [image.width, image.height] : [image?.naturalWidth, image?.naturalHeight];
  if (!image || !size[0] || !(live || image.complete)) return {total: 0, columns: []};
  const canvas = live ? image : document.createElement('canvas');
  const [w, h] = size;
  if (!live) { canvas.width = w; canvas.height = h; }
  const pen = canvas.getContext('2d'); if (!live) pen.drawImage(image, 0, 0);
  const data = pen.getImageData(0, 0, w, h).data;
  const counts = new Array(w).fill(0);
  for (let y = 0; y < h; y++) for (let x = 0; x < w; x++) {
    const i = 4 * (y * w + x);
    const off = Math.abs(data[i] - colour[0]) + Math.abs(data[i + 1] - colour[1])
      + Math.abs(data[i + 2] - colour[2]);
    if (off < 40) counts[x]++;
  }
  return {total: counts.reduce((a, b) => a + b, 0),
    columns: counts.flatMap((n, x) => n > 0.25 * h ? [x / w] : [])};
}"""
SIDEWAYS = """() => ['.jp-Notebook', '.jp-WindowedPanel-outer', '.fm-panel']
  .flatMap(selector => [...document.querySelectorAll(selector)])
  .filter(e => e.scrollWidth > e.clientWidth + 1)
  .map(e => `${e.className}: ${e.scrollWidth} > ${e.clientWidth}`)"""


def open_and_run(page, base, token, name):
    """Open a notebook and run all its cells; no cell may fail or complain."""
    page.goto(f"{base}/doc/tree/{name}.ipynb?token={token}")
    page.wait_for_function("() => window.jupyterapp?.shell?.currentWidget?.context")
    page.evaluate(READY)
    page.evaluate(RUN)
    page.wait_for_function(DONE, timeout=RUN_MS)
    assert page.evaluate(ERRORS) == []


def scroll_to(page, selector):
    """Bring something to the top of the notebook."""
    page.evaluate("s => document.querySelector(s).scrollIntoView()", selector)


def amount(page, colour, selector=PICTURE):
    """How many pixels of the picture have a colour (#rrggbb)."""
    return _colour(page, colour, selector)["total"]


def vertical_lines(page, colour, selector=PICTURE):
    """Where vertical lines of a colour stand in the picture, as shares of its width."""
    found = []
    for x in _colour(page, colour, selector)["columns"]:
        if not found or x - found[-1][-1] > APART:
            found.append([x])
        else:
            found[-1].append(x)
    return [sum(group) / len(group) for group in found]


def _colour(page, colour, selector):
    return page.evaluate(COLOUR, [selector, [int(colour[i : i + 2], 16) for i in (1, 3, 5)]])


def words(page):
    """What the figure of the panel is said to show: caption of a live one, or alternative text."""
    return page.locator(WORDS).evaluate(
        "e => e.querySelector('img')?.getAttribute('alt') ?? e.innerText.trim()"
    )


def eventually(page, ask, expected, seconds=30):
    """Ask again and again until the answer is as expected: a stale picture is no answer."""
    for _ in range(seconds * 10):
        answer = ask()
        if answer == expected:
            return
        page.wait_for_timeout(100)
    raise AssertionError(f"it stays {answer!r}, expected {expected!r}")


def results_shown(page):
    """Cells of the table of results in the panel, by key."""
    rows = page.locator(".fm-results-box tbody tr").all()
    return {row.get_attribute("data-key"): row.locator("td").all_inner_texts() for row in rows}


def status(page):
    """What the status line says, once there is nothing more to do."""
    page.wait_for_function(
        "() => document.querySelector('.fm-status .fm-ready, .fm-status .fm-alert')",
        timeout=RUN_MS,
    )
    return page.locator(".fm-status").inner_text().strip()
