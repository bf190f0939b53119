"""All addresses, room by room."""

from django.urls import include, path

urlpatterns = [
    path("", include("worksheet.ward.urls")),
    path("", include("worksheet.review.urls")),
    path("", include("worksheet.transfer.urls")),
    path("", include("worksheet.report.urls")),
]
