"""From what the user wrote to exposures: what each contact can give, take and how fast, in numbers."""

from __future__ import annotations

from purity.contacts.account import accounted
from purity.contacts.brought import charge, dust, residue
from purity.contacts.cast import mould, stream
from purity.contacts.gas import gas
from purity.contacts.neighbour import neighbour
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
#: Contacts of a cast that act for a part of its time only.
CAST: dict[str, Expose] = {"gas": stream, "mould": mould}


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
    act = BY_BODY[type(contact.body)]
    if setting.choice.process == "store" and isinstance(contact.body, Atmosphere):
        act = store
    elif contact.role == "neighbour":
        act = neighbour
    elif isinstance(contact.body, Material) and not setting.liquid:
        act = support
    elif setting.choice.process == "cast":
        act = CAST.get(contact.role, act)
    return accounted(act(contact, setting), contact, setting)


__all__ = ["BY_BODY", "Exposed", "Gap", "Setting", "expose"]
