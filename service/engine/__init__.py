"""Where runs are solved: never in the server's process, always in a slot's child, one at a time.

`records` says what goes in and comes out, `frames` how it travels, `child` is the program of the child, `process` its
handle, `slot` the child with its limits, `local` the engine of several slots inside the server,
`inquiry` small questions beside the runs.
"""
