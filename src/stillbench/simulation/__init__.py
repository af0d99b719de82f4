"""Made logs of an invented scenario: a harbour survey launch whose sonar mount is steadied by rate sensors."""
