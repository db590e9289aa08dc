"""Lead fields: what each channel measures of a current dipole at each source."""
