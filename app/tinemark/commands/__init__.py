"""What the command line does, once its arguments are understood.

Engines are loaded where they are used. Progress goes to standard error, results to standard output; bad input
raises before anything is written.
"""
