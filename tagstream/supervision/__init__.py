"""What watches over a run: its state, its requests, the service manager that started it.

It looks at no tags. Everything here is stepped by the main thread with a clock that tests give.
"""
