"""The rate centre: how contents move, in numbers only; it knows no chemistry."""
