"""The pure core: values in, values out; no clock, no files, no sockets."""
