"""The live view: events in, a picture on the terminal out; or plain lines where there is no terminal."""
