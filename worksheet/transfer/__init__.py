"""In and out: CSV, XLSX, FHIR R4, HL7 v2; preview first, then one transaction."""
