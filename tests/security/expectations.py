"""Who may use which address: one line each. A new address without a line fails the walk.

``least`` is the lowest role that may use it: ``everybody`` (no login), ``person`` (any login), ``reader``,
``recorder``, ``lead`` (of the unit), ``admin``. ``method`` is how it is asked.
"""

from typing import NamedTuple


class Address(NamedTuple):
    """What is expected of one address."""

    least: str
    method: str = "GET"


ADDRESSES: dict[str, Address] = {
    "login": Address("everybody"),
    "logout": Address("everybody", "POST"),
    "health": Address("everybody"),
    "second_factor": Address("person"),
    "second_factor_new": Address("person"),
    "second_factor_remove": Address("person", "POST"),
    "account": Address("person"),
    "session_end": Address("person", "POST"),
    "session_left": Address("person"),
    "invitation": Address("everybody"),
    "members": Address("lead"),
    "member_change": Address("lead", "POST"),
    "member_account": Address("lead", "POST"),
    "password_new": Address("everybody"),
    "unit_settings": Address("lead"),
    "trail": Address("lead"),
    "unit_new": Address("admin"),
    "home": Address("person"),
    "preferences": Address("person"),
    "set_theme": Address("person", "POST"),
    "form_token": Address("person"),
    "methods": Address("person"),
    "unit_review": Address("reader"),
    "unit_methods": Address("reader"),
    "patient": Address("reader"),
    "explain": Address("reader"),
    "mark_reviewed": Address("reader", "POST"),
    "report_unit": Address("reader"),
    "report_timeline": Address("reader"),
    "entry_new": Address("recorder"),
    "entry_live": Address("recorder", "POST"),
    "entry_correct": Address("recorder"),
    "entry_strike": Address("recorder"),
    "event_new": Address("recorder"),
    "stay_edit": Address("recorder"),
    "stay_new": Address("recorder"),
    "draft_save": Address("recorder", "POST"),
    "transfer_home": Address("recorder"),
    "transfer_send": Address("recorder", "POST"),
    "transfer_upload": Address("recorder"),
    "transfer_settle": Address("recorder", "POST"),
    "transfer_confirm": Address("recorder", "POST"),
    "transfer_discard": Address("recorder", "POST"),
    "transfer_again": Address("recorder", "POST"),
    "transfer_report": Address("recorder"),
    "transfer_forget_mapping": Address("lead", "POST"),
    "transfer_queue": Address("recorder"),
    "transfer_queue_act": Address("recorder", "POST"),
    "transfer_letters": Address("lead"),
    "transfer_letter": Address("lead"),
    "transfer_replay": Address("lead", "POST"),
    "transfer_dismiss": Address("lead", "POST"),
    "transfer_unit_csv": Address("lead"),
    "transfer_unit_fhir": Address("lead"),
    "transfer_stay_csv": Address("reader"),
    "transfer_stay_fhir": Address("reader"),
}
