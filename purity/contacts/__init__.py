"""From what the user wrote to exposures: what each contact can give, take and how fast, in numbers."""

from __future__ import annotations

from purity.contacts.brought import charge, dust, residue
from purity.contacts.gas import gas
from purity.contacts.package import package
from purity.contacts.setting import Expose, Exposed, Setting
from purity.contacts.solid import support
from purity.contacts.storage import store
from purity.contacts.wall import wall
from purity.database import Gap
from purity.scenario import Atmosphere, Charge, Contact, Dust, Material, Package, Residue

#: What the body of a contact is, and the function that knows how it acts.
BY_BODY: dict[type, Expose] = {
    Material: wall,
    Atmosphere: gas,
    Charge: charge,
    Dust: dust,
    Residue: residue,
    Package: package,
}


def expose(contact: Contact, setting: Setting) -> Exposed:
    """Return how a contact acts on the metal.

    Parameters
    ----------
    contact : Contact
    setting : Setting

    Returns
    -------
    Exposed
        With the records behind it and the gaps in it.
    """
    if setting.choice.process == "store" and isinstance(contact.body, Atmosphere):
        return store(contact, setting)
    if isinstance(contact.body, Material) and not setting.liquid:
        return support(contact, setting)
    return BY_BODY[type(contact.body)](contact, setting)


__all__ = ["BY_BODY", "Exposed", "Gap", "Setting", "expose"]
