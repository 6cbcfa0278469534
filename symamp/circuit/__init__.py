"""Room `circuit`: parts and devices, the stage, and the stage file. It imports nothing of the other rooms.

`kinds` holds the kinds of part, `stage` the plain data of a stage, `labels` the names of its symbols, and
`stagefile` reads a stage file into such data.
"""
