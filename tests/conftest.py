"""What the whole suite needs."""

import signal

# A suite started in the background has Ctrl-C ignored, and so have the programs that it starts.
signal.signal(signal.SIGINT, signal.default_int_handler)
