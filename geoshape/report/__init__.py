"""The report: one page that opens offline, and its figures."""

from geoshape.report.data import ReportData as ReportData
from geoshape.report.data import ReportOptions as ReportOptions
from geoshape.report.figures import write_figures as write_figures
from geoshape.report.page import build_report as build_report
