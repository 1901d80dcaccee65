"""The guide page shows every example of the resource, with a plot, and nothing from elsewhere."""

from __future__ import annotations

import html
import json
import re

from ladderband.web.bands import BANDS
from ladderband.web.bands_guide import TEXTS


def test_page_shows_each_example_as_it_is_sent(client):
    assert set(TEXTS) == set(BANDS.examples)
    response = client.get("/docs/bands")
    text = response.get_data(as_text=True)
    assert response.status_code == 200
    shown = [
        json.loads(html.unescape(block)) for block in re.findall(r"<pre>(\{.*?)</pre>", text, re.S)
    ]
    assert shown == [dict(BANDS.examples[name]) for name in TEXTS]
    assert text.count("data:image/png;base64,") == 4
    assert not re.findall(r'(?:src|href)="https?:', text)
    assert "default-src 'self'" in response.headers["Content-Security-Policy"]
    assert "laser safety" in text
