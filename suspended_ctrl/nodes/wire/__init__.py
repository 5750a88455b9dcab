"""
Values to and from the bytes on the wire.

rclpy's own message classes take 20 to 140 microseconds to fill and 40 to 120 to take apart. Nodes
publish and receive serialized messages, which is documented use of rclpy, and convert here.
Layouts come from rosbags' definitions of the standard messages. A message is any object with the
fields as attributes, which is all that ``review.messages`` asks for. Serialization is CDR: numbers
are aligned to their size, counted from the byte after the four of the header (OMG DDSI-RTPS 2.3,
10.2).
"""

from suspended_ctrl.nodes.wire.read import decode
from suspended_ctrl.nodes.wire.values import (
    motion_reader,
    placed_estimate_reader,
    ReadValue,
    value_reader,
    value_writer,
)

__all__ = ['ReadValue', 'decode', 'motion_reader', 'placed_estimate_reader', 'value_reader',
           'value_writer']
