-- SPDX-License-Identifier: GPL-3.0-or-later
-- Lanthanum hexaboride, certified reference material SRM 660.
return {
  name = "lab6-660",
  title = "LaB6 SRM 660",
  aliases = { "SRM 660", "660" },
  formula = "LaB6",
  space_group = "Pm-3m",
  unit = "nm",
  cell = { a = 0.415695 }, -- certificate, from memory; check against the certificate of your own jar
  expanded_uncertainty = { a = 0.000006 }, -- the same source
  coverage_factor = 2, -- assumed
  temperature_c = 25, -- assumed
  unverified = true, -- from memory; check against the certificate of your own jar
  certificate = "Standard Reference Material 660, National Institute of Standards and Technology, \z
    Gaithersburg (1989)",
  source = "Certificate of SRM 660 (1989), from memory; check against the certificate of your own jar. \z
    Chantler, Rae & Tran (2007) J. Appl. Cryst. 40 found a cell 0.000048(5) nm smaller, on the scale of \z
    Si 640b",
  stiffness_gpa = { c11 = 453.3, c12 = 18.2, c44 = 90.1 },
  stiffness_source = "Tanaka et al. (1977) Solid State Commun. 22, 203, from memory",
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
}
