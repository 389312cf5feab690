"""The screen: keys change one frozen view or the trial gains, a picture is counted, every panel is drawn from it."""

from __future__ import annotations

import sys
from collections.abc import Callable, Mapping
from concurrent.futures import CancelledError, Future, wait
from dataclasses import replace
from functools import partial
from typing import ClassVar

from encircle.tui import terminal_session

# isort: split
from textual.app import App, ComposeResult
from textual.binding import Binding, BindingType
from textual.events import Resize
from textual.geometry import Region, Size
from textual.message import Message
from textual.widgets import Input

from encircle.tui.actions import ACTIONS
from encircle.tui.cursor import FAR_STEPS, cursor_index, leaves_band, next_mark, readout_row, stepped
from encircle.tui.footer import footer_row
from encircle.tui.gain_entry import WANTED, typed_gain
from encircle.tui.line_panel import LinePanel
from encircle.tui.loop_ladder import gain_change
from encircle.tui.output import complain
from encircle.tui.palette import colour_wanted, palette
from encircle.tui.panels import Showing, panel_rows, signature, text_rows
from encircle.tui.picture import LoopProject, Picture
from encircle.tui.recount import Recounter, SupersededError, picture_of
from encircle.tui.screen_layout import Placement, arrange
from encircle.tui.sheet import Ink, Row, Sheet
from encircle.tui.title_line import title_row
from encircle.tui.trial import Trial, applied
from encircle.tui.trial_store import TrialFileError, TrialStore
from encircle.tui.view import STEPS, Panel, View
from encircle.tui.wording import as_declared, rounded

PATIENCE = 0.1  # s: a count that takes longer is finished beside the screen
COARSE, FINE = 10, 1  # tenths of a decibel
WHILE_TYPING = {action.id for action in ACTIONS if action.urgent}
WHILE_HELPING = {"help", "back", "full_size", "scroll_down", "scroll_up", "outer_loop", "inner_loop", "quit", "suspend"}


class Counted(Message):
    """A count that was waited for beside the screen has ended."""

    def __init__(self, answer: Future[Picture]) -> None:
        super().__init__()
        self.answer = answer


class EncircleApp(App[int]):
    """Steps through the loops of one project and tries gains on them."""

    CSS = """
    Screen { layout: vertical; overflow: hidden hidden; }
    #entry { position: absolute; display: none; height: 1; border: none; padding: 0 1; background: transparent; }
    #entry > .input--cursor { background: transparent; color: ansi_default; text-style: reverse; }
    """
    AUTO_FOCUS = None
    ENABLE_COMMAND_PALETTE = False
    ALLOW_SELECT = False
    # All bindings have priority: keys that arrive in one burst are then taken in their order, typed values included.
    BINDINGS: ClassVar[list[BindingType]] = [
        Binding(",".join(a.keys), f"act('{a.id}')", a.description, show=False, id=a.id, priority=True) for a in ACTIONS
    ]

    def __init__(self, project: LoopProject, *, store: TrialStore | None = None, ascii_only: bool = False) -> None:
        super().__init__(ansi_color=True)
        self.animation_level = "none"
        self.theme = "ansi-dark"
        self._project = project
        self._store = store
        self._ascii_only = ascii_only
        self._trial = Trial()
        self._view = View()
        self._picture: Picture | None = None
        self._recounter = Recounter()
        self._answer: Future[Picture] | None = None
        self._shown: dict[Panel, tuple[object, ...]] = {}
        self._notice = ""
        self._failure = ""
        self._extent = Size(80, 24)
        self._stop_listening: Callable[[], None] = lambda: None
        self._handlers: Mapping[str, Callable[[], None]] = self._all_handlers()

    def _all_handlers(self) -> Mapping[str, Callable[[], None]]:
        return {
            **{name: partial(self._look, step) for name, step in STEPS.items()},
            "back": self._back,
            "outer_loop": partial(self._step_loop, 1),
            "inner_loop": partial(self._step_loop, -1),
            "gain_up": partial(self._step_gain, COARSE),
            "gain_down": partial(self._step_gain, -COARSE),
            "gain_up_fine": partial(self._step_gain, FINE),
            "gain_down_fine": partial(self._step_gain, -FINE),
            "type_gain": self._type_gain,
            "put_back": self._put_back,
            "put_all_back": partial(self._try, Trial()),
            "cursor_right": partial(self._move_cursor, 1),
            "cursor_left": partial(self._move_cursor, -1),
            "cursor_far_right": partial(self._move_cursor, FAR_STEPS),
            "cursor_far_left": partial(self._move_cursor, -FAR_STEPS),
            "next_mark": partial(self._to_mark, 1),
            "previous_mark": partial(self._to_mark, -1),
            "scroll_down": partial(self._scroll_pages, 1),
            "scroll_up": partial(self._scroll_pages, -1),
            "quit": partial(self.exit, 0),
            "suspend": self.action_suspend_process,
        }

    # ---- the parts of the screen -----------------------------------------------------------------------------------

    def compose(self) -> ComposeResult:
        """One widget for the title, each panel, the readout and the footer; the entry lies over the footer."""
        styles = palette(colour=colour_wanted())
        for name in ("title", *(panel.name.lower() for panel in Panel), "readout", "footer"):
            yield LinePanel(styles, id=name)
        yield Input(id="entry", select_on_focus=False, compact=True)

    def on_mount(self) -> None:
        """Listen to signals, take up what was tried last time, and count."""
        entry = self.query_one("#entry", Input)
        entry.cursor_blink = False
        self.app_resume_signal.subscribe(self, lambda _: self.refresh(layout=True))
        if not self.is_headless:
            self._stop_listening = terminal_session.leave_on_signals(self._leave)
        self._take_up_kept_trial()
        self._count()

    def on_unmount(self) -> None:
        """Nothing is left running."""
        self._stop_listening()
        self._recounter.close()

    def on_resize(self, event: Resize) -> None:
        """Every panel at its new place."""
        self._extent = event.size
        self._draw()

    def _leave(self, status: int) -> None:
        self.exit(status, return_code=status)

    # ---- keys ------------------------------------------------------------------------------------------------------

    def check_action(self, action: str, parameters: tuple[object, ...]) -> bool | None:
        """While a value is typed, or the help page is read, only the keys that make sense there."""
        if action != "act":
            return True
        name = str(parameters[0])
        if self.query_one("#entry", Input).display:
            return name in WHILE_TYPING
        return self._view.panel is not Panel.HELP or name in WHILE_HELPING or name.startswith("panel_")

    def action_act(self, name: str) -> None:
        """Do what a key asks for; one key makes one frame."""
        self._notice = ""
        with self.batch_update():
            self._handlers[name]()
            self._draw()

    def _look(self, step: Callable[[View], View]) -> None:
        self._view = step(self._view)

    def _back(self) -> None:
        if self.query_one("#entry", Input).display:
            self._close_entry()
        else:
            self._look(STEPS["back"])

    def _step_loop(self, step: int) -> None:
        if self._view.panel is Panel.HELP:
            self._scroll(step)
            return
        number = min(max(self._view.loop + step, 0), len(self._project.loop_names) - 1)
        if number != self._view.loop:
            self._view = replace(self._view, loop=number, scroll=0)
            self._count()

    def _move_cursor(self, steps: int) -> None:
        if self._picture is None:
            return
        curve, index = self._picture.curve, cursor_index(self._picture, self._view)
        start, end = float(curve.frequency[index]), stepped(curve, index, steps)
        if leaves_band(self._project.band, start, end) and not self._view.whole_band:
            self._notice = "end of the band that is shown; a shows all frequencies"
        else:
            self._view = replace(self._view, cursor=end)

    def _to_mark(self, direction: int) -> None:
        if self._picture is None:
            return
        mark = next_mark(self._picture, cursor_index(self._picture, self._view), direction)
        if mark is None:
            self._notice = f"no marked frequency further {'up' if direction > 0 else 'down'}"
        else:
            self._view = replace(self._view, cursor=mark)

    def _scroll_pages(self, pages: int) -> None:
        self._scroll(pages * max(self._place_of_chosen().height - 3, 1))

    def _scroll(self, rows: int) -> None:
        """Within the text of the chosen panel: its last row is never scrolled away."""
        showing, place = self._showing(), self._place_of_chosen()
        if showing is None or self._view.panel.is_plot or self._view.panel is Panel.LOOPS:
            return
        length = len(text_rows(self._view.panel, place.width, showing))
        furthest = max(length - place.height + 1, 0)
        self._view = replace(self._view, scroll=min(max(self._view.scroll + rows, 0), furthest))

    # ---- gains on trial --------------------------------------------------------------------------------------------

    @property
    def _loop_name(self) -> str:
        return self._project.loop_names[self._view.loop]

    @property
    def _filed_gain(self) -> float:
        return self._project.gains[self._loop_name]

    def _step_gain(self, tenths: int) -> None:
        self._try(self._trial.stepped(self._loop_name, self._filed_gain, tenths))

    def _put_back(self) -> None:
        self._try(self._trial.put_back(self._loop_name))

    def _try(self, trial: Trial) -> None:
        """Count with other gains, and keep them for the next start."""
        if trial == self._trial:
            return
        self._trial = trial
        self._keep_trial()
        self._count()

    def _keep_trial(self) -> None:
        if self._store is None:
            return
        try:
            self._store.keep(self._trial)
        except OSError as error:
            self._notice = f"the trial cannot be kept for the next start: {error.strerror or error}"

    def _take_up_kept_trial(self) -> None:
        if self._store is None:
            return
        try:
            self._trial = self._store.kept(self._project.loop_names)
        except TrialFileError as error:
            self._notice = str(error)
        if self._trial.gains:
            gains = ", ".join(f"{name} {self._change(name)}" for name in self._trial.gains)
            self._notice = f"TRIAL gains of last time are in force again: {gains}. R forgets them."

    def _change(self, name: str) -> str:
        filed = self._project.gains[name]
        return gain_change(self._trial.gain(name, filed), filed)

    def _type_gain(self) -> None:
        entry = self.query_one("#entry", Input)
        entry.value = ""
        now, filed = self._trial.gain(self._loop_name, self._filed_gain), self._filed_gain
        hint = f"gain of {self._loop_name}, now {rounded(now)}, file {as_declared(filed)}: {WANTED}"
        entry.placeholder = Sheet(self._extent.width, ascii_only=self._ascii_only).clean(hint)
        entry.styles.offset = (0, self._extent.height - 1)
        entry.styles.width = self._extent.width
        entry.display = True
        self.screen.set_focus(entry)

    def _close_entry(self) -> None:
        self.query_one("#entry", Input).display = False
        self.set_focus(None)

    def on_input_submitted(self, event: Input.Submitted) -> None:
        """The typed gain, or the reason why it is none."""
        self._notice = ""
        with self.batch_update():
            self._close_entry()
            try:
                gain = typed_gain(event.value, self._trial.gain(self._loop_name, self._filed_gain))
            except ValueError as error:
                self._notice = str(error)
            else:
                self._try(self._trial.typed(self._loop_name, self._filed_gain, gain))
            self._draw()

    # ---- counting --------------------------------------------------------------------------------------------------

    @property
    def counting(self) -> bool:
        """Whether a count is under way."""
        return self._answer is not None

    def _count(self) -> None:
        """Ask for a new picture; a quick one is waited for, so that the key and its result are one frame."""
        work = partial(self._picture_with, self._trial, self._view.loop)
        self._answer = answer = self._recounter.request(work)
        if self._picture is not None:
            wait([answer], timeout=PATIENCE)
        if answer.done():
            self._accept(answer)
        else:
            answer.add_done_callback(lambda done: self.post_message(Counted(done)) and None)

    def _picture_with(self, trial: Trial, chosen: int, superseded: Callable[[], bool]) -> Picture:
        return picture_of(self._project, applied(self._project, trial), chosen, superseded)

    def on_counted(self, event: Counted) -> None:
        """A long count has ended. While a key is held down, older ones show the way to the newest."""
        with self.batch_update():
            self._accept(event.answer)
            self._draw()

    def _accept(self, answer: Future[Picture]) -> None:
        """Take the picture, or say why there is none and keep the last good one."""
        if answer is self._answer:
            self._answer = None
        try:
            picture = answer.result()
        except (SupersededError, CancelledError):
            return
        except Exception as error:  # a fault of the engine must neither end the screen nor go unseen
            self._failure = f"COUNT FAILED, what is shown is older: {type(error).__name__}: {error}"
        else:
            self._failure = ""
            if picture.chosen == self._view.loop:
                self._picture = picture

    # ---- drawing ---------------------------------------------------------------------------------------------------

    def _showing(self) -> Showing | None:
        if self._picture is None:
            return None
        return Showing(self._picture, self._view, self._project.declarations, self._project.band, self._ascii_only)

    def _places(self) -> tuple[Placement, ...]:
        width, height = self._extent
        return arrange(width, height, self._view, len(self._project.loop_names))

    def _place_of_chosen(self) -> Placement:
        places = self._places()
        return next((place for place in places if place.panel is self._view.panel), places[0])

    def _draw(self) -> None:
        """Every row of the screen from the present picture; the widgets repaint what differs."""
        width, height = self._extent
        showing = self._showing()
        places = {place.panel: place for place in self._places()}
        for panel in Panel:
            widget = self._line_panel(panel.name.lower())
            place = places.get(panel) if showing is not None else None
            widget.place(Region(place.x, place.y, place.width, place.height) if place is not None else None)
            if showing is not None and place is not None:
                self._show_panel(widget, place, showing)
        self._draw_line("title", 0, self._title(width))
        if showing is not None:
            gain = self._trial.gain(self._loop_name, self._filed_gain)
            readout = readout_row(showing.picture, self._view, gain, width, ascii_only=self._ascii_only)
            self._draw_line("readout", height - 2, readout)
        notice = self._notice or self._failure
        self._draw_line("footer", height - 1, footer_row(width, notice=notice, ascii_only=self._ascii_only))

    def _show_panel(self, widget: LinePanel, place: Placement, showing: Showing) -> None:
        """Rows are made again only where something that they depend on has changed."""
        wanted = signature(place, showing)
        if self._shown.get(place.panel) != wanted:
            self._shown[place.panel] = wanted
            widget.show(panel_rows(place, showing))

    def _draw_line(self, name: str, y: int, row: Row) -> None:
        widget = self._line_panel(name)
        widget.place(Region(0, y, self._extent.width, 1))
        widget.show((row,))

    def _line_panel(self, name: str) -> LinePanel:
        return self.query_one(f"#{name}", LinePanel)

    def _title(self, width: int) -> Row:
        if self._picture is not None:
            return title_row(self._picture, width, counting=self.counting, ascii_only=self._ascii_only)
        sheet = Sheet(width, ascii_only=self._ascii_only)
        words = ("  counting …" if self.counting else "  nothing could be counted", Ink.DOUBT)
        sheet.row(" ", (self._project.declarations.title, Ink.STRONG), words)
        return sheet.rows[0]


def run_screen(project: LoopProject) -> int:
    """Show the screen until the user leaves it; the exit status of the process.

    0 when left by a key, 2 where no screen can be shown, 128 + n after signal n, 1 after a fault of the screen itself.
    """
    reason = terminal_session.why_no_screen(sys.__stdin__, sys.__stderr__)
    if reason is not None:
        complain(f"encircle: {reason}")
        return 2
    declarations = project.declarations
    store = TrialStore(declarations.file, declarations.sha256)
    app = EncircleApp(project, store=store, ascii_only=terminal_session.ascii_only(sys.__stderr__))
    app.run(mouse=False)
    terminal_session.forget_lost_terminal(sys.__stdout__, sys.__stderr__)
    return app.return_code or 0
