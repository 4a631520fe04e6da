"""Truth images: textures given by formulas, motions, cameras, materials and whole virtual tests.

Everything here is invented; nothing is a measurement of a real material or a real machine.
Heavy modules load at first use.
"""

import lazy_loader

__getattr__, __dir__, __all__ = lazy_loader.attach(
    __name__,
    submod_attrs={
        "camera": ["Camera", "picture"],
        "comparison": ["Compared", "compare"],
        "coupon": ["Coupon", "Waist"],
        "files": ["render"],
        "hole": ["HoledPlate"],
        "materials": ["Elastic", "NeoHookean", "RambergOsgood", "proof_stress"],
        "motions": ["Affine", "Bending", "Displacement", "Sinusoid", "homogeneous", "rigid", "rotation"],
        "scenario": ["Scenario", "load_scenario", "scenarios"],
        "textures": ["Cosines", "Dots", "Photograph"],
        "virtual_test": ["VirtualTest"],
    },
)
