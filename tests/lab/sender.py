"""Sends real RTP, made by FFmpeg's libraries through PyAV, at the pace of speech.

Usage: sender.py CODEC HOST PORT LOCALPORT PACKETS [DSCP]. Prints the packets sent and the octets of
their payloads as JSON. It runs as a process of its own, in a network namespace.
"""

import json
import sys
import time

import av
import numpy as np

# Encoder, sampling rate, samples of 20 ms, payload type.
CODECS = {
    "PCMU": ("pcm_mulaw", 8000, 160, 0),
    "PCMA": ("pcm_alaw", 8000, 160, 8),
    "G722": ("g722", 16000, 320, 9),
    "opus": ("libopus", 48000, 960, 111),
}


def send(codec, host, port, local_port, packets, dscp=46):
    """Sends so many packets of 20 ms; returns the packets and the payload octets sent."""
    encoder, rate, samples, payload_type = CODECS[codec]
    url = (
        f"rtp://{host}:{port}?localrtpport={local_port}&localrtcpport={local_port + 1}&dscp={dscp}"
    )
    options = {"payload_type": str(payload_type)}
    sent = octets = 0
    with av.open(url, "w", format="rtp", options=options) as output:
        stream = output.add_stream(encoder, rate=rate, layout="mono")
        tone = (8000 * np.sin(np.arange(samples) * 2 * np.pi * 400 / rate)).astype(np.int16)
        begin = time.monotonic()
        for number in range(packets):
            frame = av.AudioFrame.from_ndarray(tone.reshape(1, -1), format="s16", layout="mono")
            frame.sample_rate, frame.pts = rate, number * samples
            for packet in stream.encode(frame):
                sent, octets = sent + 1, octets + packet.size
                output.mux(packet)
            time.sleep(max(0.0, begin + (number + 1) * 0.02 - time.monotonic()))
    return sent, octets


if __name__ == "__main__":
    codec, host, *numbers = sys.argv[1:]
    sent, octets = send(codec, host, *map(int, numbers))
    print(json.dumps({"packets": sent, "payload_octets": octets}))
