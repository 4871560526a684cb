drop table owner_standing, ending, acceptance, protection, plant_settings;
