"""The MCU: bytes and ticks in, bytes and outputs out; it implements every clause of PROTOCOL.md.

Interface (ticks are ``config.tick_hz`` to the second, absolute, forward only):

``Mcu(plant, eeprom, config)``   plant is a `board.Board`; it boots at tick 0 by power-on
``feed(data, tick)``             bytes from the line; what they command acts at that tick (advances there first)
``advance_to(tick)``             let time pass: samples, segments, timers
``take_output() -> bytes``       lines for the host since last taken
``reset(cause)``                 a reset, now
``tick, state, latched, v_word, i_word``  what it does now
"""
