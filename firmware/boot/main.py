# Start-up. It cannot fail: whatever goes wrong ends at the prompt, with no output enabled.
import sys
import time

try:
    import slots

    if slots.maintenance():
        print("Lodestroke: prompt, as asked")
    else:
        window_ms = slots.window_ms()
        print("Lodestroke: Ctrl-C within", window_ms, "ms gets the prompt")
        time.sleep_ms(window_ms)      # the interpreter still owns Ctrl-C here
        slots.start()
except KeyboardInterrupt:
    print("Lodestroke: prompt")
except Exception as fault:
    sys.print_exception(fault)
