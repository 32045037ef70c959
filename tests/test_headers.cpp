// SPDX-License-Identifier: GPL-3.0-or-later
// Holds the precompiled headers of the tests.
