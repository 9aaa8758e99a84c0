"""Records every frame that arrives at or leaves a port into a capture file, until SIGTERM.

Usage: recorder.py PORT FILE. A plain packet socket and dpkt's writer: it shares no code with the
taps. Prints "ready" once it hears.
"""

import signal
import socket
import sys
import time
from pathlib import Path

import dpkt

EVERYTHING = 3  # ETH_P_ALL


def record(port, path):
    heard = socket.socket(socket.AF_PACKET, socket.SOCK_RAW, socket.htons(EVERYTHING))
    heard.setsockopt(socket.SOL_SOCKET, socket.SO_RCVBUF, 1 << 23)
    heard.bind((port, EVERYTHING))
    heard.settimeout(0.2)
    ended = []
    signal.signal(signal.SIGTERM, lambda *_: ended.append(True))
    with Path(path).open("wb") as file:
        writer = dpkt.pcap.Writer(file, nano=True)
        print("ready", flush=True)
        while not ended:
            try:
                frame = heard.recv(65535)
            except TimeoutError:
                continue
            writer.writepkt(frame, time.time())


if __name__ == "__main__":
    record(*sys.argv[1:])
