"""Pins of a Pico that is not there: what main.py does to them is printed."""


class Pin:
    def __init__(self, number):
        self.number = number


class ADC:
    def __init__(self, number):
        self._code = {26: 65535, 27: 1000}[number]

    def read_u16(self):
        return self._code


class PWM:
    def __init__(self, pin, freq, duty_u16):
        print("output", pin.number, "at first", duty_u16)

    def duty_u16(self, value):
        print("output", value)
