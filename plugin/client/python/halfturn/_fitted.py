# SPDX-License-Identifier: Apache-2.0
"""The reply to a fit."""


class Fitted(dict):
    """The `fitted` reply: a dict whose fields can also be read as attributes (`fit.verdict`, `fit.rabi_hz["value"]`)."""

    def __getattr__(self, name):
        try:
            return self[name]
        except KeyError:
            raise AttributeError(f"the reply has no field {name!r}; it has {', '.join(sorted(self))}") from None

    @property
    def applies(self):
        """Whether the scan's verdict is "apply": every pulse has a new length, or the carrier is to be moved. One pulse alone may
        have a new length where it is not, so `lengths_s` is what to load in any case."""
        return self.get("verdict") == "apply"

    @property
    def refused(self):
        """Whether the scan was refused; `why` says the reasons."""
        return self.get("verdict") == "refuse"

    @property
    def why(self):
        """The reasons and cautions, most serious first, as one text."""
        return "; ".join(reason["text"] for reason in self.get("reasons", []))

    def pulse(self, name):
        """All that is said of one pulse, a dict."""
        pulses = self.get("pulses", {})
        if name not in pulses:
            raise KeyError(f"the drive has no pulse {name!r}; it has {', '.join(sorted(pulses)) or 'none'}")
        return pulses[name]

    def length_s(self, name):
        """The length to load for this pulse, in s. Under "keep" and "refuse" it is the one in force."""
        return self._of(name, "length_s")

    def amplitude(self, name):
        """The relative amplitude to load for a pulse that says `adjust: amplitude`."""
        return self._of(name, "length_amplitude")

    def lengths_s(self):
        """The lengths to load for all pulses, {name: s}: what `Client.applied` takes as `pulses`."""
        return {name: pulse["length_s"] for name, pulse in self.get("pulses", {}).items() if "length_s" in pulse}

    def amplitudes(self):
        """The relative amplitudes to load for all pulses that say `adjust: amplitude`, {name: amplitude}. `Client.applied` takes them
        as `pulses`, alone or together with lengths."""
        return {name: pulse["length_amplitude"] for name, pulse in self.get("pulses", {}).items() if "length_amplitude" in pulse}

    def value(self, name):
        """The value of an estimate such as "rabi_hz"; None where there is none."""
        return self.get(name, {}).get("value")

    def _of(self, name, field):
        pulse = self.pulse(name)
        if field not in pulse:
            other = "amplitude" if field == "length_s" else "length_s"
            raise KeyError(f"pulse {name!r} has no {field}; read it with .{other}({name!r})")
        return pulse[field]
