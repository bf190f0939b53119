"""Addresses of this room."""

from django.urls import path

from . import downloads, letters, queue, uploads

urlpatterns = [
    path("u/<slug:slug>/transfer/", uploads.home, name="transfer_home"),
    path("u/<slug:slug>/transfer/send/", uploads.send, name="transfer_send"),
    path("u/<slug:slug>/transfer/upload/<int:pk>/", uploads.upload, name="transfer_upload"),
    path("u/<slug:slug>/transfer/upload/<int:pk>/settle/", uploads.settle, name="transfer_settle"),
    path("u/<slug:slug>/transfer/upload/<int:pk>/confirm/", uploads.confirm, name="transfer_confirm"),
    path("u/<slug:slug>/transfer/upload/<int:pk>/discard/", uploads.discard, name="transfer_discard"),
    path("u/<slug:slug>/transfer/upload/<int:pk>/again/", uploads.again, name="transfer_again"),
    path("u/<slug:slug>/transfer/upload/<int:pk>/report.json", uploads.report, name="transfer_report"),
    path("u/<slug:slug>/transfer/mapping/<int:pk>/forget/", uploads.forget_mapping, name="transfer_forget_mapping"),
    path("u/<slug:slug>/transfer/queue/", queue.queue, name="transfer_queue"),
    path("u/<slug:slug>/transfer/queue/act/", queue.act, name="transfer_queue_act"),
    path("u/<slug:slug>/transfer/messages/", letters.letters, name="transfer_letters"),
    path("u/<slug:slug>/transfer/messages/<int:pk>/", letters.letter, name="transfer_letter"),
    path("u/<slug:slug>/transfer/messages/<int:pk>/replay/", letters.replay, name="transfer_replay"),
    path("u/<slug:slug>/transfer/messages/<int:pk>/dismiss/", letters.dismiss, name="transfer_dismiss"),
    path("u/<slug:slug>/export.csv", downloads.unit_csv, name="transfer_unit_csv"),
    path("u/<slug:slug>/export.fhir.json", downloads.unit_fhir, name="transfer_unit_fhir"),
    path("u/<slug:slug>/stay/<str:reference>/export.csv", downloads.stay_csv, name="transfer_stay_csv"),
    path("u/<slug:slug>/stay/<str:reference>/export.fhir.json", downloads.stay_fhir, name="transfer_stay_fhir"),
]
