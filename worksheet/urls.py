"""All addresses, room by room."""

from django.urls import include, path

urlpatterns = [
    path("", include("worksheet.review.urls_accounts")),
    path("", include("worksheet.review.urls")),
    path("", include("worksheet.transfer.urls")),
    path("", include("worksheet.report.urls")),
]

handler400 = "worksheet.review.errors.bad_request"
handler403 = "worksheet.review.errors.forbidden"
handler404 = "worksheet.review.errors.not_found"
handler500 = "worksheet.review.errors.failed"
