"""Simulated light on simulated detectors, with the true answers in closed form.

`scenario` reads what is to be simulated, `sources` lists the kinds of light, `pieces` makes the
tags and `truth` says what a right analysis of them finds. A new kind of light is one file with
a `Source` and one line in `sources`.

Nothing here knows feeds, files of tags or estimates. The same scenario and seed give the same
tags (with the same release of numpy, which may improve its generators), whatever the duration:
a longer run begins with the shorter one.
"""
