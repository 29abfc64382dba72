"""Tiles: one row of sufficient statistics per minute, which add up to any window.

Strategy. A subject keeps whole tables: row = minute of the time axis that had data, columns = counts and sums. An
update groups a batch's samples by minute with ``bincount`` and adds; a window is the sum of a slice of rows; merging
two streams' tiles adds rows of equal key. So the merge law holds by construction, a 24 h log costs no Python loop per
epoch, and the memory is bounded: past ``FINE_ROWS`` minutes the oldest rows are rolled up into ten-minute rows, past
``MIDDLE_ROWS`` of those into hours.
"""
