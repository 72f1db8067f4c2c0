"""Instead of serving for ever: try each thing that main.py's pins can do."""


def serve(device, pins):
    print("read", pins.read())
    print("rates", pins.set_rate((500, 1)), pins.set_rate((20000, 1)), pins.period_us)
    for code in (device.drive.limits[0], device.drive.limits[3]):
        pins.write(code)
    print("heard", pins.heard())
    pins.say(b"said\n")
    print("slots", device.slots)
