"""Addresses of accounts, members, the unit's choices and the trail."""

from django.urls import path

from . import account, health, member_account, members, second_factor, session, trail, unit_new, unit_settings

urlpatterns = [
    path("login/", account.LogIn.as_view(), name="login"),
    path("logout/", account.LogOut.as_view(), name="logout"),
    path("health/", health.health, name="health"),
    path("account/", account.account, name="account"),
    path("account/session-end", account.session_end, name="session_end"),
    path("account/session-left", session.session_left, name="session_left"),
    path("account/second-factor/", second_factor.second_factor, name="second_factor"),
    path("account/second-factor/new/", second_factor.second_factor_new, name="second_factor_new"),
    path("account/second-factor/remove", second_factor.second_factor_remove, name="second_factor_remove"),
    path("invitation/<str:token>/", members.invitation, name="invitation"),
    path("password/<str:uidb64>/<str:token>/", member_account.NewPassword.as_view(), name="password_new"),
    path("units/new/", unit_new.unit_new, name="unit_new"),
    path("u/<slug:slug>/members/", members.members, name="members"),
    path("u/<slug:slug>/members/<int:pk>/change", members.member_change, name="member_change"),
    path("u/<slug:slug>/members/<int:pk>/account", member_account.member_account, name="member_account"),
    path("u/<slug:slug>/settings/", unit_settings.unit_settings, name="unit_settings"),
    path("u/<slug:slug>/trail/", trail.trail, name="trail"),
]
