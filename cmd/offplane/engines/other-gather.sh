#!/bin/sh
# After the array, whatever became of its tasks: it tells what is missing.
exec {{.Program}} ensemble gather {{.Folder}}
