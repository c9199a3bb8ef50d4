"""Requests to a run while it goes on: who asks, what may be asked, and who answers.

One JSON object a request, one a reply, over ZeroMQ (ask with a REQ socket):

    {"request": "status"}
    {"request": "mark", "key": "power_mw", "value": 1.5}     a number or a text; "at_ps" if wanted
    {"request": "new-run"}                                   end this run, begin the next one
    {"request": "restart-spans"}                             empty the spans, not the whole run
    {"request": "stop"}                                      end cleanly

A reply is {"ok": true, ...}, or {"ok": false, "error": text}. Nothing else can be asked: no paths,
no settings.
"""

from __future__ import annotations

from tagstream.control.requests import MarkRequest, PlainRequest, Request

__all__ = ["MarkRequest", "PlainRequest", "Request"]
