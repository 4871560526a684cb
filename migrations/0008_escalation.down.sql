drop index matter_alarmed;
drop table outbox_target;
drop table outbox;
drop table quieting;
drop table escalation_step;
drop table overdue_round;
