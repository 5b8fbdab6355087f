"""pbm: watches laboratory analysers between control events by the patient results themselves."""

__version__ = "0.1.0"
