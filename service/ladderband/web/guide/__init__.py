"""The guide under ``/docs``: Markdown files whose requests are computed and drawn by this service.

``texts/*.md`` are the pages. Besides Markdown (no raw HTML) they know

- a fenced block ``request RESOURCE NAME``: lines ``picture: what the picture shows`` (draws it; the
  words are its alternative text), ``example: NAME`` (the body is this example of the resource) or
  ``merge: NAME/pointer`` (these members of another block's answer join the body), then the JSON
  body. The page shows it as a curl command with its picture.
- a fenced block ``sweep NAME`` with the JSON body of a sweep; the page shows its table.
- a fenced block ``include FILE LANGUAGE``: a file of ``snippets/``.
- a fenced block with the name of a table of ``tables.py``: made from the program itself.
- ``{{NAME/pointer:format}}``: a number of an answer. The last steps of a pointer may be ``max``,
  ``min``, ``len`` or ``sum``; ``*1e9`` after it is a factor. ``settings``, ``ranges`` and
  ``most`` stand for the limits of this service.

No result is written into a text as digits, so none can go stale; tests send every request and run
every fenced ``sh`` block.
"""
