"""The pages in one frame: what a visitor gets."""

import logging
from urllib.parse import parse_qs

import panel as pn
import panel_material_ui as pmui
from panel.reactive import Syncable
from panel.util import edit_readonly

from app import theme
from app.pages.distortion import DistortionPage
from app.pages.header import Header, tell
from app.pages.limits import LimitsPage
from app.pages.response import ResponsePage
from app.session import visit

PRODUCT = "Elastovox"
INPUT_DELAY = 20           # ms the server waits for more input before it acts; Panel's own 50 can be felt
HEADER_PX = 44
LOST = ("The connection is lost: what you change now is not computed. Save is not possible either; start the program "
        "again and reload this page.")
# a cone of film in section, 32 x 32, as the browser's tab shows it
ICON = ("data:image/png;base64,"
        "iVBORw0KGgoAAAANSUhEUgAAACAAAAAgCAQAAADZc7J/AAAAfUlEQVR42u1UQQ7AIAjjZ3yFn/A0n+YuzkmCWliW7GB7I0hL"
        "rBIdHHwFYSkOGR9QpHrE9euE+kof9tDb2antPYi21uJWa0o/4GGu5Dub6yvuDd4U8LDec8gHJ/RNQjShbz3YqTeBmx5S2U5R"
        "LO/Pml0umvbdAI2+1fN7/gEXqAULHUKSMsUAAAAASUVORK5CYII=")
LOADER_CSS = "#loader:not(.error) { background: none !important; pointer-events: none; } #loader .spinner { opacity: 0.4; }"
FRAME = {
    "& .header": {"backgroundColor": "background.default", "color": "text.primary", "boxShadow": "none",
                  "borderBottom": "1px solid", "borderColor": "divider", "backgroundImage": "none"},
    "& .MuiToolbar-root": {"minHeight": f"{HEADER_PX}px !important", "margin": 0, "paddingX": "16px !important"},
    "& .main": {"backgroundColor": "background.default"},
}

log = logging.getLogger(__name__)


def page(design):
    """The whole page of one visitor, beginning with a design, or with the one in the page's own address.

    Parameters
    ----------
    design : engine.design.Design

    Returns
    -------
    panel_material_ui.Page
    """
    pn.extension(notifications=True, exception_handler=failed, disconnect_notification=LOST)
    lower_input_delay()
    session = visit(design, pn.state.curdoc)
    open_address(session.state)
    header = Header(session, PRODUCT)
    response = ResponsePage(session, dark=pn.config.theme == "dark")
    LimitsPage(session, response)
    distortion = DistortionPage(session, response)
    frame = pmui.Page(header=[header], main=[response.view], theme_config=colours(), sx=FRAME, busy_indicator=None,
                      title="", meta_title=PRODUCT, favicon=ICON, raw_css=[LOADER_CSS], sizing_mode="stretch_both")
    ignore_busy(frame)
    frame.param.watch(lambda event: (response.set_dark(event.new), distortion.set_dark()), "dark_theme")
    session.start()
    pn.state.onload(session.connected)
    pn.state.onload(response.controls.go_live)
    return frame


def open_address(state):
    """Begin with the design in the address (``?d=...``); a bad one is told, and taken out of the address.

    Parameters
    ----------
    state : app.state.DesignState
    """
    location = pn.state.location
    given = parse_qs((location.search or "").lstrip("?"), keep_blank_values=True).get("d") if location else None
    if not given:
        return
    try:
        state.open_link(given[0])
    except ValueError as error:
        text = f"{str(error)[:1].upper()}{str(error)[1:]} Shown instead: {state.design.name}."

        def say():
            location.search = ""
            tell(text)

        pn.state.onload(say)


def failed(error):
    """Tell the visitor of an error nobody foresaw, and the terminal all about it."""
    log.error("error in a callback", exc_info=error)
    tell(f"The program failed at this ({type(error).__name__}). Undo the last step, or open the page again; "
         "the terminal has the details.")


def ignore_busy(frame):
    """Cut the frame's own busy mark, which no one sees here, off from the server's.

    Setting it twice for every event made Panel look through all of the page's models: half of the server's time.
    """
    with edit_readonly(frame):
        frame.busy = False


def lower_input_delay():
    """Have the server wait only briefly for more input before it acts on a moving slider."""
    Syncable._debounce = INPUT_DELAY


def colours():
    """The frame's colours, light and dark, from the same palette as the figures."""
    return {mode: {"palette": _palette(theme.palette(mode == "dark")), "typography": {"fontFamily": theme.FONT}}
            for mode in ("light", "dark")}


def _palette(roles):
    """The frame's palette out of the figures' roles."""
    return {"primary": {"main": roles.pumping}, "error": {"main": roles.warn}, "divider": roles.faint,
            "background": {"default": roles.page, "paper": roles.page},
            "text": {"primary": roles.ink, "secondary": roles.muted}}
