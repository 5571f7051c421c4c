-- SPDX-License-Identifier: GPL-3.0-or-later
-- Cerium dioxide, certified reference material SRM 674b.
return {
  name = "ceo2-674b",
  title = "CeO2 SRM 674b",
  aliases = { "SRM 674b", "674b", "ceo2" },
  formula = "CeO2",
  space_group = "Fm-3m",
  unit = "nm",
  cell = { a = 0.5411651 }, -- certificate, from memory; check against the certificate of your own jar
  expanded_uncertainty = { a = 0.000008 }, -- the same source
  coverage_factor = 2, -- from memory
  temperature_c = 22.5,
  unverified = true, -- from memory; check against the certificate of your own jar
  certificate = "Standard Reference Material 674b, National Institute of Standards and Technology, \z
    Gaithersburg",
  source = "Certificate of SRM 674b, from memory; check against the certificate of your own jar. The same \z
    cell fits 44 lines of a synchrotron scan of a ceria reference powder, FC-BENTEN, Matsumoto et al. \z
    (2025) Applied Sciences",
  stiffness_gpa = { c11 = 403, c12 = 105, c44 = 60 },
  stiffness_source = "Nakajima, Yoshihara & Ishigame (1994) Phys. Rev. B 50, 13297, from memory",
  hazard = "fine powder: avoid dust, follow the safety data sheet and local rules",
}
