"""The digests of the catalogue's series, which are their identity in every ledger there is.

Changing one is a deliberate act: ledgers that hold the series need a migration.
"""

from __future__ import annotations

DIGESTS = {
    ("3.12.12", "walk"): "4a5413197df4c81c2897b33a91d6cadd13bf9f6aa5fdb93e67116e73a67e27e3",
    ("3.12.12", "polygon"): "6134654a3717959e9910f4e17673a413bcc5f5bc79b182026a3ff70079dd440e",
    ("4.8.8", "walk"): "f97c25c4822e4ef17f8cfe3c05ee3b19a069d54fe783c71c0fa865e76f6e27e3",
    ("4.8.8", "polygon"): "165329e5701bc5416954ca1c6172b0f98c3be93177261a772a00112d05401296",
    ("bcc", "walk"): "19e7e71b6c7f605f4872328d53618cade2aac6796b7d3cf84d1db5ee28aaced4",
    ("bcc", "polygon"): "63928c3cb39079f3b2fe31ea8a4355b03ed9af30ee773b8bbea6a0c5a6e8f40a",
    ("cubic", "walk"): "3b197834e5ddf6365abca37939ac5530dd4b5fcd1ea611333877862118eba546",
    ("cubic", "polygon"): "bf70e650b0ae889e4fa79582cfb6fc98f6cd40dcd15803e782ee8fa70dc21dc0",
    ("diamond", "walk"): "02cd4606df2bce32bafa35ad5160184afa036dd3e3d0e5b075f4e0eb19f22df8",
    ("diamond", "polygon"): "66ebd37f484bacf2a445db3f3f2f27df8984ebf2b54daf685d39e62e1f13e522",
    ("dice", "walk"): "747f8fb2d869f23a3df1e864158ac6ebc5176bfc3cf2d10153b40692064e116b",
    ("dice", "polygon"): "3df8ba25c0e71cdf5810ca4692a761a9d572bb06db88d0e8009934c20ccc4c8b",
    ("fcc", "walk"): "a0d3bd9b01707412d4500dd9ad98731da6e8a44af3783b1f74c4be7ca675c418",
    ("fcc", "polygon"): "e6bfe851c6f2273b241f909188ea402b91818a9847e97668b889851294448772",
    ("honeycomb", "walk"): "b446f8c448f2ba6254c400176325807172c0f2e800daad6cdfe2ae88f810d053",
    ("honeycomb", "polygon"): "40bab6adcc505c705ec33390fbe011ecc2077c569e20245de1695d2a58afa31d",
    ("hypercubic4", "walk"): "27e66cb155f24e012720a4bd231bc6c77c5ec0070fef2b813468f4c3000da9ec",
    ("hypercubic4", "polygon"): "d0823ff9da6045f5f5c3f80bc4c41cb7f0d9a30d085e915020a19fd8dbb78c5a",
    ("hypercubic5", "walk"): "72ebfc77d42f773c01100f4339672059e6b1f3de2db5d6e11b9cd3aa3f9a0e24",
    ("hypercubic5", "polygon"): "dfcf233834f3a521e1ee6a62f6ab06973863e53de6e273510186b375f6c8bdf9",
    ("kagome", "walk"): "50a6229193fce256e5ec2d54b8a1dee230a43f2c2b45b62c873356e0379a4270",
    ("kagome", "polygon"): "5ac9ec4e8ac205212d06cfd5b4d33f4d692d88609731c40249d8461f8d8eccac",
    ("king", "walk"): "fa43d9f81caae81a46d4c1e4bb1ff04731ebaa543021ebd66d0f80da699ef67c",
    ("king", "polygon"): "5cd27e5d0aad3330cd6271db7373617dd63a2a94f302c6edaa1efff3d9867bbe",
    ("l-lattice", "walk"): "128afd343bc3075fb3e7078a36d77214db0a3114d1bfb98f24a035395ccfa462",
    ("l-lattice", "polygon"): "10158833df199ccc4542aec3437763e22139dbfc999976986514da6a79f3a784",
    ("ladder", "walk"): "99c8b404ec6e9e44e69beffaf681c3345ea9ae40cae55333d6e7ed1d76d97c3b",
    ("ladder", "polygon"): "627b559c98ab382fa0032da4f20f35afaa2335e5764de5276a50f59ac9d7155d",
    ("manhattan", "walk"): "1b2972bbd1bd46d52f1c8e15c37d271ad8f85af5c5f33ff81de26c0d0f5ba2de",
    ("manhattan", "polygon"): "d4958919be399afdfd7474aa0ed0b745fddd66d938aae3936bab1be3fefa4f0c",
    ("prism", "walk"): "c9c97b0e194b9652b301064082200e58063286fe25d02023d51c67870628fdee",
    ("prism", "polygon"): "e34834f31ec4697fc585394afa0ca23101fe0fbccd37ded56e261b62ff3a3b3c",
    ("square", "walk"): "5b15e3b9c0b16634aab145747f2009bca3f59bc2b10b193706e538660342b947",
    ("square", "polygon"): "fc291bda5d1b62d010f0c348897a70a021faa3e9a572dd180198e8037f5ff46c",
    ("triangular", "walk"): "f6643fbbbc6b438334fa65705e5a340ef5eaee93df1bdb30a9bc2a8055ea8763",
    ("triangular", "polygon"): "bcf98dd1a0120fdc325249bed175cdf3825aed3362a4feaf8f3343aac623bc5e",
    ("dice", "walk", "hub"): "cf92508607e5f3fac558b8c72502a5f8276b9d99110f7cd7f3959b8f3920a7bc",
    ("dice", "walk", "rim1"): "19ffd62141aafb11631af52bd30efc50700f2018ac5895c1e9a1ed5aba5f41f5",
    ("dice", "walk", "rim2"): "3e782a2c111b104aaedc48bbd4b4855c4004f753120bbcf4fb934066dad924c5",
}
